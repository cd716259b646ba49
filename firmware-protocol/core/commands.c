/* What the host asks for: done once, answered as often as it comes. */
#include "internal.h"

/* Answers wait for a link like everything else; the answer to a host that went away is asked for again anyway. */
static void remember(struct turnline *winder, uint32_t id, uint8_t answer)
{
	uint8_t at = winder->answer_next;
	winder->answer_ids[at] = id;
	winder->answers[at] = (uint8_t)(answer | ANSWER_DUE);
	winder->answer_next = (uint8_t)((at + 1) % answersKeptMin);
}

/* An answer that is not worth remembering, since nothing was done. Where two come at once, the newer is sent. */
static void answer_loose(struct turnline *winder, uint32_t id, uint8_t answer)
{
	winder->loose_id = id;
	winder->loose_answer = answer;
	winder->to_say |= SAY_LOOSE_ANSWER;
}

/* Whether the command was acted on before; then it is answered again. */
static int answered_before(struct turnline *winder, uint32_t id)
{
	uint8_t at;
	for (at = 0; at < answersKeptMin; at++) {
		if (winder->answers[at] != ANSWER_NONE && winder->answer_ids[at] == id) {
			winder->answers[at] |= ANSWER_DUE;
			return 1;
		}
	}
	return 0;
}

/*
 * Ids grow from command to command, and may wrap: a plan whose id lies in the half of all numbers behind the newest was
 * overtaken on the way.
 */
static int overtaken(const struct turnline *winder, uint32_t id)
{
	uint32_t behind = winder->newest_set - id;
	return (winder->more_bits & BIT_SET_BEFORE) && behind > 0 && behind <= UINT32_C(0x7FFFFFFF);
}

static void obey_set(struct turnline *winder, const struct command *set)
{
	if (set->boot != winder->boot) {
		answer_loose(winder, set->id, ANSWER_BOOT);
	} else if (answered_before(winder, set->id)) {
		return;
	} else if (overtaken(winder, set->id)) {
		answer_loose(winder, set->id, ANSWER_OLD);
	} else {
		int held = plan_set(winder, set);
		winder->newest_set = set->id;
		winder->more_bits |= BIT_SET_BEFORE;
		remember(winder, set->id, held ? ANSWER_OK : ANSWER_RANGE);
	}
}

static void ask_stop(struct turnline *winder)
{
	winder->bits |= BIT_STOP_ASKED;
	winder->more_bits &= (uint8_t)~BIT_STOP_RAN;
	winder->stop_at = LOW16(winder->now_ms);
}

static void obey_stop(struct turnline *winder, const struct command *stop)
{
	int wired = winder->config->stop_output & TURNLINE_STOP_COMMAND;
	if (stop->has_boot && stop->boot != winder->boot) {
		if (stop->has_id)
			answer_loose(winder, stop->id, ANSWER_BOOT);
		else
			winder->to_say |= SAY_NO_BOOT;
	} else if (stop->has_id && answered_before(winder, stop->id)) {
		return;
	} else if (wired) {
		ask_stop(winder);
		if (stop->has_id)
			remember(winder, stop->id, ANSWER_OK);
	} else if (stop->has_id) {
		remember(winder, stop->id, ANSWER_UNWIRED);
	} else {
		winder->to_say |= SAY_NO_UNWIRED;
	}
}

static void obey_ack(struct turnline *winder, const struct command *ack)
{
	/* What another boot was acknowledged frees nothing here; nor does a number this boot never gave. */
	if (ack->boot != winder->boot || ack->n > winder->line_number || ack->e > winder->event_number)
		return;
	if (ack->n > 0 || ack->e > 0)
		winder->bits |= BIT_ACKNOWLEDGED;
	ring_free(winder, ack->n, ack->e);
}

void obey(struct turnline *winder, const struct command *command)
{
	winder->heard_at = LOW16(winder->now_ms);
	winder->bits &= (uint8_t)~BIT_SILENT;
	switch (command->verb) {
	case VERB_ASK:
		winder->to_say |= SAY_HI;
		return;
	case VERB_SET:
		obey_set(winder, command);
		return;
	case VERB_STOP:
		obey_stop(winder, command);
		return;
	case VERB_ACK:
		obey_ack(winder, command);
		return;
	case VERB_SYNC:
		if (command->boot != winder->boot)
			winder->to_say |= SAY_NO_BOOT;
		else if (!ring_resend_after(winder, command->e))
			winder->to_say |= SAY_NO_GONE;
		return;
	case VERB_HOLD:
		winder->bits |= BIT_HELD;
		winder->hold_ms = winder->now_ms + command->amount;
		return;
	default:
		/* The time of day stamps nothing here. */
		return;
	}
}

/* A whole line with a good checksum that cannot be acted on. Silent where it is not even known what was meant. */
void answer_refused(struct turnline *winder, enum refusal why, const struct command *command)
{
	if (why == REFUSED_VERB)
		winder->to_say |= SAY_NO_VERB;
	else if (why == REFUSED_RANGE && command->verb == VERB_SET && command->has_id && command->has_boot)
		answer_loose(winder, command->id, command->boot == winder->boot ? ANSWER_RANGE : ANSWER_BOOT);
}

/* Time goes on for the stop that was asked for and for the host that is not heard. */
void stop_pass(struct turnline *winder)
{
	uint16_t now = LOW16(winder->now_ms);
	uint16_t watchdog_ms = winder->config->watchdog_ms;
	if ((winder->bits & BIT_STOP_ASKED) && LOW16(now - winder->stop_at) >= stopVoidMs)
		winder->more_bits |= BIT_STOP_RAN;
	if ((winder->more_bits & BIT_STOP_RAN) && !(winder->bits & BIT_TURNING)) {
		winder->bits &= (uint8_t)~BIT_STOP_ASKED;
		winder->more_bits &= (uint8_t)~BIT_STOP_RAN;
	}
	if (watchdog_ms > 0 && LOW16(now - winder->heard_at) >= watchdog_ms)
		winder->bits |= BIT_SILENT;
}

int turnline_stop_wanted(const struct turnline *winder)
{
	const struct turnline_config *config = winder->config;
	enum turnline_cue cue = turnline_cue_now(winder);
	if (config->stop_output == 0 || !(winder->bits & (BIT_TURNING | BIT_STOP_ASKED)))
		return 0;
	if (winder->bits & BIT_STOP_ASKED)
		return 1;
	if ((config->stop_output & TURNLINE_STOP_MARK) && cue == TURNLINE_CUE_STOP)
		return 1;
	return config->watchdog_ms > 0 && (winder->bits & BIT_SILENT) != 0;
}
