/* The main loop's side: what the interrupt counted becomes ticks and events, and lines go out in their order. */
#include "internal.h"

/* A line of replay every so many milliseconds, and a tenth of a second's worth at once at most. */
#define REPLAY_MS (1000 / replayLinesPerSecondMax)
#define REPLAY_CREDIT_MAX 100u

/* Between two looks at the sensor more refused or suspected pulses than this are noise: see ring.c. */
#define REFUSED_JUMP 0x3FFFu
#define MISSED_JUMP 0x3Fu

TURNLINE_ASSERT(report_fits_a_tick, tickMsMax <= 0x7FFF);
#if TURNLINE_RING_LINES <= 32
TURNLINE_ASSERT(state_within_1_kib, sizeof(struct turnline) <= 1024);
#endif
#if TURNLINE_RING_LINES <= 256
TURNLINE_ASSERT(state_within_8_kib, sizeof(struct turnline) <= 8192);
#endif
/* 16-bit int: every constant used in arithmetic is written so that it does not need more. */
TURNLINE_ASSERT(int_has_16_bits, sizeof(int) >= 2);

static uint16_t seal(const struct turnline_retained *kept)
{
	unsigned char bytes[12];
	put_bytes(bytes, 4, kept->boot);
	put_bytes(bytes + 4, 4, kept->forward);
	put_bytes(bytes + 8, 4, kept->reverse);
	return crc_over(bytes, sizeof bytes);
}

void turnline_begin(struct turnline *winder, const struct turnline_config *config, uint32_t boot, uint8_t levels,
                    const struct turnline_retained *found)
{
	unsigned char *byte = (unsigned char *)winder;
	size_t at;
	for (at = 0; at < sizeof *winder; at++)
		byte[at] = 0;
	winder->config = config;
	winder->boot = boot;
	sensor_begin(&winder->sensor, config, levels);
	if (found != NULL && found->check == seal(found)) {
		winder->bits |= BIT_RETAINED;
		winder->retained_boot = found->boot;
		winder->retained_forward = found->forward;
		winder->retained_reverse = found->reverse;
		if (winder->boot == found->boot)
			winder->boot++;
	}
}

int turnline_retain(const struct turnline *winder, struct turnline_retained *kept)
{
	struct turnline_retained now;
	now.boot = winder->boot;
	now.forward = winder->forward;
	now.reverse = winder->reverse;
	if (!(winder->bits & BIT_ACKNOWLEDGED)) {
		if (!(winder->bits & BIT_RETAINED))
			return 0;
		/* A chain of boots the host never heard of is bridged by adding up. */
		now.boot = winder->retained_boot;
		now.forward += winder->retained_forward;
		now.reverse += winder->retained_reverse;
	}
	now.check = seal(&now);
	if (kept->check != now.check || kept->boot != now.boot || kept->forward != now.forward || kept->reverse != now.reverse) {
		volatile struct turnline_retained *to = kept;
		to->check = (uint16_t)~now.check;
		to->boot = now.boot;
		to->forward = now.forward;
		to->reverse = now.reverse;
		to->check = now.check;
	}
	return 1;
}

void raise_event(struct turnline *winder, uint8_t kind)
{
	if (ring_make_room(winder) && kind != KIND_BUFOV && !ring_holds(winder, KIND_BUFOV)) {
		/* One report tells of all that went while it waits to be heard. */
		winder->event_number++;
		ring_add(winder, KIND_BUFOV);
		ring_make_room(winder);
	}
	winder->event_number++;
	ring_add(winder, kind);
}

/*
 * No edge since the tick before: whatever comes next is not the bouncing of what came before. An edge may come while this
 * is found out: it clears the word itself, or is seen by the second look.
 */
static void settle(struct turnline *winder)
{
	uint8_t seen = winder->changes_seen;
	winder->changes_seen = winder->sensor.changes;
	if (winder->changes_seen != seen)
		return;
	winder->sensor.settled = 1;
	if (winder->sensor.changes != seen)
		winder->sensor.settled = 0;
}

static void tick(struct turnline *winder)
{
	uint16_t wait = winder->config->report_ms;
	ring_forget_old(winder);
	if (!ring_add_tick(winder))
		winder->to_say |= SAY_LOOSE_TICK;
	if (!(winder->bits & BIT_TURNING) || (winder->bits & BIT_HELD) || wait > tickMsMax)
		wait = tickMsMax;
	/* By the grid, so that the loop's own pace does not add up; never several at once. */
	winder->tick_at = LOW16(winder->tick_at + wait);
	if (LOW16(winder->tick_at - LOW16(winder->now_ms)) > wait)
		winder->tick_at = LOW16(winder->now_ms + wait);
	if (!(winder->bits & BIT_TURNING))
		settle(winder);
}

static void tick_now(struct turnline *winder)
{
	winder->tick_at = LOW16(winder->now_ms);
}

/* The first pulse after standing: the event carries the totals the spindle stood at. */
static void started(struct turnline *winder)
{
	winder->period_us = 0;
	winder->bits |= BIT_TURNING;
	raise_event(winder, KIND_GO);
	tick_now(winder);
}

static void stood(struct turnline *winder)
{
	winder->sensor.standing = 1;
	plan_stood(winder);
	winder->bits &= (uint8_t)~BIT_TURNING;
	winder->period_us = 0;
	raise_event(winder, KIND_STOP);
	winder->tick_at = LOW16(winder->now_ms + tickMsMax);
}

static void take_counts(struct turnline *winder)
{
	struct counted counted;
	uint8_t reverse;
	int was_turning = winder->bits & BIT_TURNING;
	sensor_read(&winder->sensor, &counted);
	if (counted.refused - winder->refused > REFUSED_JUMP || (uint16_t)(counted.missed - winder->missed) > MISSED_JUMP)
		ring_forget_ticks(winder);
	winder->refused = counted.refused;
	winder->missed = counted.missed;
	if (counted.pulses == winder->pulses)
		return;
	if (!was_turning)
		started(winder);
	winder->pulses = counted.pulses;
	winder->pulse_at = LOW16(winder->now_ms);
	winder->period_us = counted.period_us;
	winder->forward = counted.forward;
	winder->reverse = counted.reverse;
	reverse = counted.heading < 0 ? BIT_REVERSE : 0;
	if ((winder->bits & BIT_REVERSE) != reverse) {
		winder->bits ^= BIT_REVERSE;
		if (was_turning)
			raise_event(winder, KIND_REV);
	}
	plan_call_out(winder);
}

/* How long no pulse may come before the spindle is taken to stand. */
static uint16_t stand_ms(const struct turnline *winder)
{
	uint32_t wait_ms = winder->period_us / 1000 * standPeriods;
	if (winder->period_us == 0)
		return standUnknownMs;
	if (wait_ms > standMsMax)
		return standMsMax;
	return wait_ms < standMsMin ? standMsMin : (uint16_t)wait_ms;
}

void turnline_poll(struct turnline *winder, uint32_t now_ms)
{
	uint16_t now = LOW16(now_ms);
	winder->now_ms = now_ms;
	if (!(winder->more_bits & BIT_POLLED)) {
		winder->more_bits |= BIT_POLLED;
		winder->resend_at = winder->replay_at = winder->heard_at = now;
		winder->tick_at = LOW16(now + tickMsMax);
	}
	take_counts(winder);
	if ((winder->bits & BIT_TURNING) && LOW16(now - winder->pulse_at) >= stand_ms(winder))
		stood(winder);
	if ((winder->bits & BIT_HELD) && now_ms - winder->hold_ms < UINT32_C(0x80000000))
		winder->bits &= (uint8_t)~BIT_HELD;
	if (LOW16(now - winder->tick_at) < 0x8000u)
		tick(winder);
	if (LOW16(now - winder->resend_at) >= eventResendMs) {
		winder->resend_at = now;
		ring_mark_unheard(winder);
	}
	stop_pass(winder);
}

void turnline_link(struct turnline *winder, int up)
{
	winder->to_say = up ? SAY_HI : 0;
	winder->bits &= (uint8_t)~(BIT_LINKED | BIT_HELD);
	winder->replay_credit = 0;
	winder->replay_at = LOW16(winder->now_ms);
	if (up) {
		winder->bits |= BIT_LINKED;
		ring_mark_for_link(winder);
	} else {
		ring_unmark(winder);
	}
}

static void heard_line(struct turnline *winder)
{
	struct command command;
	uint32_t key;
	enum refusal why = read_line(winder->heard, winder->heard_length, &command, &key);
	if (why == READ_OK)
		obey(winder, &command);
	else
		answer_refused(winder, why, &command);
}

void turnline_receive(struct turnline *winder, uint8_t byte)
{
	if (byte == '\n') {
		if (!(winder->more_bits & BIT_DROPPING))
			heard_line(winder);
		winder->more_bits &= (uint8_t)~BIT_DROPPING;
		winder->heard_length = 0;
	} else if (winder->more_bits & BIT_DROPPING) {
		return;
	} else if (byte == 0 || byte > 0x7Fu || winder->heard_length >= lineBytesMax - 1) {
		winder->more_bits |= BIT_DROPPING;
	} else {
		winder->heard[winder->heard_length++] = (char)byte;
	}
}

static size_t next_answer(struct turnline *winder, char *out)
{
	uint8_t at;
	for (at = 0; at < answersKeptMin; at++) {
		if (winder->answers[at] & ANSWER_DUE) {
			winder->answers[at] &= (uint8_t)~ANSWER_DUE;
			return write_answer(winder, winder->answers[at], 1, winder->answer_ids[at], out);
		}
	}
	return 0;
}

/* What is to be said once: taken off the list, then written. */
static size_t next_saying(struct turnline *winder, char *out)
{
	uint8_t say = winder->to_say;
	/* The lowest bit that is set. */
	uint8_t one = (uint8_t)(say & (0u - say));
	winder->to_say = (uint8_t)(say & ~one);
	switch (one) {
	case SAY_HI:
		return write_hi(winder, out);
	case SAY_NO_VERB:
		return write_answer(winder, ANSWER_VERB, 0, 0, out);
	case SAY_NO_BOOT:
		return write_answer(winder, ANSWER_BOOT, 0, 0, out);
	case SAY_NO_GONE:
		return write_answer(winder, ANSWER_GONE, 0, 0, out);
	case SAY_NO_UNWIRED:
		return write_answer(winder, ANSWER_UNWIRED, 0, 0, out);
	default:
		return write_answer(winder, winder->loose_answer, 1, winder->loose_id, out);
	}
}

static size_t send_kept(struct turnline *winder, unsigned char *record, char *out)
{
	struct line_values values;
	ring_values(winder, record, &values);
	ring_handed(record);
	return write_kept(winder, &values, out);
}

/* A tick of now that is not kept: its number is given when it is sent, so none is given twice. */
static size_t send_loose_tick(struct turnline *winder, char *out)
{
	struct line_values values;
	winder->to_say &= (uint8_t)~SAY_LOOSE_TICK;
	values.kind = KIND_TICK;
	values.n = ++winder->line_number;
	values.e = winder->event_number;
	values.f = winder->forward;
	values.v = winder->reverse;
	values.r = turnline_rpm(winder);
	values.t = winder->now_ms;
	values.x = winder->refused;
	values.g = winder->missed;
	return write_kept(winder, &values, out);
}

static size_t next_replay(struct turnline *winder, char *out)
{
	uint16_t now = LOW16(winder->now_ms);
	uint16_t passed = LOW16(now - winder->replay_at);
	unsigned char *record;
	winder->replay_at = now;
	winder->replay_credit =
		(uint8_t)(passed >= REPLAY_CREDIT_MAX - winder->replay_credit ? REPLAY_CREDIT_MAX : winder->replay_credit + passed);
	if ((winder->bits & BIT_HELD) || winder->replay_credit < REPLAY_MS)
		return 0;
	record = ring_replay(winder);
	if (record == NULL)
		return 0;
	winder->replay_credit = (uint8_t)(winder->replay_credit - REPLAY_MS);
	return send_kept(winder, record, out);
}

size_t turnline_next(struct turnline *winder, char *out)
{
	unsigned char *record;
	size_t length;
	if (!(winder->bits & BIT_LINKED))
		return 0;
	if (winder->to_say & (uint8_t)~SAY_LOOSE_TICK)
		return next_saying(winder, out);
	length = next_answer(winder, out);
	if (length > 0)
		return length;
	record = ring_live(winder);
	if (record != NULL)
		return send_kept(winder, record, out);
	if (winder->to_say & SAY_LOOSE_TICK)
		return send_loose_tick(winder, out);
	return next_replay(winder, out);
}

void turnline_button(struct turnline *winder)
{
	raise_event(winder, KIND_BTN);
}

size_t turnline_bye(const struct turnline *winder, char *out)
{
	return write_bye(winder, out);
}

uint32_t turnline_forward(const struct turnline *winder)
{
	return winder->forward;
}

uint32_t turnline_reverse(const struct turnline *winder)
{
	return winder->reverse;
}

int16_t turnline_rpm(const struct turnline *winder)
{
	uint32_t rpm;
	if (!(winder->bits & BIT_TURNING) || winder->period_us == 0)
		return 0;
	/* 60 000 000 µs a minute, divided twice so that 32 bits hold everything; rounded. */
	rpm = (UINT32_C(60000000) / winder->config->pulses_per_turn + winder->period_us / 2) / winder->period_us;
	if (rpm > 0x7FFFu)
		rpm = 0x7FFFu;
	return (int16_t)(winder->bits & BIT_REVERSE ? -(int16_t)rpm : (int16_t)rpm);
}
