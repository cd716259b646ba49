/*
 * The lines the host has not acknowledged, oldest first, each packed into TURNLINE_RECORD_BYTES:
 *
 *	byte   0      kind in the low half, marks in the high half
 *	bytes  1-3    n, low 24 bits
 *	bytes  4-5    e, low 16 bits
 *	bytes  6-8    f, low 24 bits
 *	bytes  9-11   v, low 24 bits
 *	bytes 12-13   r, two's complement
 *	an event: bytes 14-17 t, all 32 bits; bytes 18-19 e, high 16 bits
 *	a tick:   bytes 14-16 t, low 24 bits; bytes 17-18 x, low 16 bits; byte 19 g, low 8 bits
 *
 * Numbers lie lowest byte first. Each only grows, so the low bits and the number of now give the whole, as long as no
 * line is further back than its bits reach. ring_forget_old lets a line go well before that: a tick after three and a
 * half hours, any line after twelve million turns or lines.
 */
#include "internal.h"

#define MARK_LIVE 0x10u   /* to be sent as it came */
#define MARK_REPLAY 0x20u /* to be sent again */
#define MARK_SENT 0x40u
#define MARK_WAITED 0x80u /* sent before the last look at what is not acknowledged */
#define KIND_MASK 0x0Fu

#define AT_N 1
#define AT_E 4
#define AT_F 6
#define AT_V 9
#define AT_R 12
#define AT_T 14
#define AT_E_HIGH 18
#define AT_X 17
#define AT_G 19

/* Three quarters of what the bits reach: between two lines no number grows by the last quarter (see turnline_poll). */
#define REACH_24 UINT32_C(0xBFFFFF)
#define REACH_16 UINT32_C(0xBFFF)
#define REACH_8 UINT32_C(0xBF)

TURNLINE_ASSERT(ring_is_large_enough, TURNLINE_RING_LINES >= ringLinesMin);
TURNLINE_ASSERT(ring_is_counted_in_16_bits, TURNLINE_RING_LINES <= 10000);
TURNLINE_ASSERT(record_holds_a_tick, AT_G + 1 == TURNLINE_RECORD_BYTES);
TURNLINE_ASSERT(record_holds_an_event, AT_E_HIGH + 2 == TURNLINE_RECORD_BYTES);

/* How far back the low bits lie behind the number of now. */
static uint32_t behind(uint32_t now, uint32_t low, uint32_t mask)
{
	return (now - low) & mask;
}

uint8_t ring_kind(const unsigned char *record)
{
	return (uint8_t)(record[0] & KIND_MASK);
}

int ring_is_event(const unsigned char *record)
{
	return ring_kind(record) != KIND_TICK;
}

static uint32_t number_of(const struct turnline *winder, const unsigned char *record)
{
	return winder->line_number - behind(winder->line_number, get_bytes(record + AT_N, 3), UINT32_C(0xFFFFFF));
}

static uint32_t event_of(const struct turnline *winder, const unsigned char *record)
{
	uint32_t low = get_bytes(record + AT_E, 2);
	if (ring_is_event(record))
		return low | (get_bytes(record + AT_E_HIGH, 2) << 16);
	return winder->event_number - behind(winder->event_number, low, UINT32_C(0xFFFF));
}

void ring_values(const struct turnline *winder, const unsigned char *record, struct line_values *values)
{
	values->kind = ring_kind(record);
	values->n = number_of(winder, record);
	values->e = event_of(winder, record);
	values->f = winder->forward - behind(winder->forward, get_bytes(record + AT_F, 3), UINT32_C(0xFFFFFF));
	values->v = winder->reverse - behind(winder->reverse, get_bytes(record + AT_V, 3), UINT32_C(0xFFFFFF));
	values->r = (int16_t)(signed_of(get_bytes(record + AT_R, 2) << 16) / 65536);
	if (values->kind != KIND_TICK) {
		values->t = get_bytes(record + AT_T, 4);
		values->x = values->g = 0;
		return;
	}
	values->t = winder->now_ms - behind(winder->now_ms, get_bytes(record + AT_T, 3), UINT32_C(0xFFFFFF));
	values->x = winder->refused - behind(winder->refused, get_bytes(record + AT_X, 2), UINT32_C(0xFFFF));
	values->g = (uint32_t)winder->missed - behind(winder->missed, record[AT_G], UINT32_C(0xFF));
}

static void take_out(struct turnline *winder, uint16_t at)
{
	uint16_t to;
	winder->kept--;
	for (to = at; to < winder->kept; to++) {
		uint8_t byte;
		for (byte = 0; byte < TURNLINE_RECORD_BYTES; byte++)
			winder->ring[to][byte] = winder->ring[to + 1][byte];
	}
}

/* Gives up the tick that is missed least: the one whose neighbours are closest in time. The ends go last. 0: there is none. */
static int thin(struct turnline *winder)
{
	uint32_t least_ms = UINT32_C(0xFFFFFFFF);
	uint16_t least = winder->kept;
	uint16_t at;
	for (at = 0; at < winder->kept; at++) {
		uint32_t gap_ms = UINT32_C(0x1000000);
		if (ring_is_event(winder->ring[at]))
			continue;
		if (at > 0 && at + 1u < winder->kept)
			gap_ms = behind(get_bytes(winder->ring[at + 1] + AT_T, 3), get_bytes(winder->ring[at - 1] + AT_T, 3), UINT32_C(0xFFFFFF));
		if (gap_ms < least_ms) {
			least_ms = gap_ms;
			least = at;
		}
	}
	if (least == winder->kept)
		return 0;
	take_out(winder, least);
	return 1;
}

/* Room for one line. Returns 1 when an event had to be given up for it; a report of lost events is the last to go. */
int ring_make_room(struct turnline *winder)
{
	uint16_t at;
	if (winder->kept < TURNLINE_RING_LINES || thin(winder))
		return 0;
	for (at = 0; at < winder->kept; at++) {
		if (ring_kind(winder->ring[at]) != KIND_BUFOV)
			break;
	}
	take_out(winder, at < winder->kept ? at : 0);
	return 1;
}

/* Keeps a line of the totals of now, under the next number. There must be room. An event has its number already. */
void ring_add(struct turnline *winder, uint8_t kind)
{
	unsigned char *record = winder->ring[winder->kept++];
	int16_t rpm = turnline_rpm(winder);
	winder->line_number++;
	record[0] = (unsigned char)(kind | (winder->bits & BIT_LINKED ? MARK_LIVE : 0u));
	put_bytes(record + AT_N, 3, winder->line_number);
	put_bytes(record + AT_E, 2, winder->event_number);
	put_bytes(record + AT_F, 3, winder->forward);
	put_bytes(record + AT_V, 3, winder->reverse);
	put_bytes(record + AT_R, 2, (uint32_t)rpm);
	if (kind == KIND_TICK) {
		put_bytes(record + AT_T, 3, winder->now_ms);
		put_bytes(record + AT_X, 2, winder->refused);
		put_bytes(record + AT_G, 1, winder->missed);
	} else {
		put_bytes(record + AT_T, 4, winder->now_ms);
		put_bytes(record + AT_E_HIGH, 2, winder->event_number >> 16);
	}
}

/* Keeps a tick; where only events could make room for it, it is not kept. Returns whether it is. */
int ring_add_tick(struct turnline *winder)
{
	if (winder->kept >= TURNLINE_RING_LINES && !thin(winder))
		return 0;
	ring_add(winder, KIND_TICK);
	return 1;
}

int ring_holds(const struct turnline *winder, uint8_t kind)
{
	uint16_t at;
	for (at = 0; at < winder->kept; at++) {
		if (ring_kind(winder->ring[at]) == kind)
			return 1;
	}
	return 0;
}

static int too_old(const struct turnline *winder, const unsigned char *record)
{
	if (behind(winder->line_number, get_bytes(record + AT_N, 3), UINT32_C(0xFFFFFF)) > REACH_24 ||
	    behind(winder->forward, get_bytes(record + AT_F, 3), UINT32_C(0xFFFFFF)) > REACH_24 ||
	    behind(winder->reverse, get_bytes(record + AT_V, 3), UINT32_C(0xFFFFFF)) > REACH_24)
		return 1;
	if (ring_is_event(record))
		return 0;
	return behind(winder->event_number, get_bytes(record + AT_E, 2), UINT32_C(0xFFFF)) > REACH_16 ||
	       behind(winder->now_ms, get_bytes(record + AT_T, 3), UINT32_C(0xFFFFFF)) > REACH_24 ||
	       behind(winder->refused, get_bytes(record + AT_X, 2), UINT32_C(0xFFFF)) > REACH_16 ||
	       behind(winder->missed, record[AT_G], UINT32_C(0xFF)) > REACH_8;
}

/*
 * Lets go of lines before their bits no longer tell them. An event among them is a gap that SYNC is answered `gone` for:
 * it went unacknowledged for twelve million turns or lines.
 */
void ring_forget_old(struct turnline *winder)
{
	uint16_t at = 0;
	while (at < winder->kept) {
		if (too_old(winder, winder->ring[at]))
			take_out(winder, at);
		else
			at++;
	}
}

void ring_forget_ticks(struct turnline *winder)
{
	uint16_t at = 0;
	while (at < winder->kept) {
		if (ring_is_event(winder->ring[at]))
			at++;
		else
			take_out(winder, at);
	}
}

/* What the host has on disk: events are freed by `e` alone, ticks by `n`. */
void ring_free(struct turnline *winder, uint32_t n, uint32_t e)
{
	uint16_t at = 0;
	while (at < winder->kept) {
		const unsigned char *record = winder->ring[at];
		int done = ring_is_event(record) ? event_of(winder, record) <= e : number_of(winder, record) <= n;
		if (done)
			take_out(winder, at);
		else
			at++;
	}
}

/* Every kept event after `e` goes again. Returns whether all of them are still there. */
int ring_resend_after(struct turnline *winder, uint32_t e)
{
	uint32_t first = winder->event_number + 1;
	uint16_t at = winder->kept;
	while (at > 0) {
		unsigned char *record = winder->ring[--at];
		if (!ring_is_event(record) || event_of(winder, record) <= e)
			continue;
		first = event_of(winder, record);
		record[0] |= MARK_REPLAY;
	}
	return e >= winder->event_number || first == e + 1;
}

/* Events sent a while ago and not acknowledged go again, the oldest first: an acknowledgement cannot pass them. */
void ring_mark_unheard(struct turnline *winder)
{
	uint8_t lines = 0;
	uint16_t at;
	for (at = 0; at < winder->kept && lines < eventResendLines; at++) {
		unsigned char *record = winder->ring[at];
		if (!ring_is_event(record) || !(record[0] & MARK_SENT) || (record[0] & MARK_REPLAY))
			continue;
		lines++;
		if (record[0] & MARK_WAITED)
			record[0] = (unsigned char)((record[0] & ~(MARK_WAITED | MARK_SENT)) | MARK_REPLAY);
		else
			record[0] |= MARK_WAITED;
	}
}

/* At a new link: every event, and ticks a second apart. */
void ring_mark_for_link(struct turnline *winder)
{
	uint32_t newer = 0;
	int any = 0;
	uint16_t at = winder->kept;
	while (at > 0) {
		unsigned char *record = winder->ring[--at];
		uint32_t t = get_bytes(record + AT_T, 3);
		record[0] &= KIND_MASK;
		if (!ring_is_event(record)) {
			if (any && behind(newer, t, UINT32_C(0xFFFFFF)) < replayTickMs)
				continue;
			any = 1;
			newer = t;
		}
		record[0] |= MARK_REPLAY;
	}
}

void ring_unmark(struct turnline *winder)
{
	uint16_t at;
	for (at = 0; at < winder->kept; at++)
		winder->ring[at][0] &= KIND_MASK;
}

/* The oldest line that was not sent yet, or NULL. */
unsigned char *ring_live(struct turnline *winder)
{
	uint16_t at;
	for (at = 0; at < winder->kept; at++) {
		if (winder->ring[at][0] & MARK_LIVE)
			return winder->ring[at];
	}
	return NULL;
}

/* What goes again next: events in their order, then ticks, newest first. NULL: nothing. */
unsigned char *ring_replay(struct turnline *winder)
{
	unsigned char *tick = NULL;
	uint16_t at;
	for (at = 0; at < winder->kept; at++) {
		unsigned char *record = winder->ring[at];
		if (!(record[0] & MARK_REPLAY))
			continue;
		if (ring_is_event(record))
			return record;
		tick = record;
	}
	return tick;
}

void ring_handed(unsigned char *record)
{
	record[0] = (unsigned char)((record[0] & ~(MARK_LIVE | MARK_REPLAY)) | MARK_SENT);
}
