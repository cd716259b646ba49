/* The plan the device holds, and the cues it calls by itself. Marks are turns of the coil, counted from the plan's zero. */
#include "internal.h"

/* Targets and what is early before them never exceed turnsMax, so turns and marks add up within 32 bits. */
static uint32_t at_most(uint32_t value, uint32_t most)
{
	return value < most ? value : most;
}

static uint32_t at_least(uint32_t value, uint32_t least)
{
	return value > least ? value : least;
}

static int32_t turns_of(const struct turnline *winder)
{
	uint32_t net = winder->forward - winder->reverse;
	uint32_t from = (uint32_t)winder->plan.from;
	return signed_of(winder->plan.bits & PLAN_NEGATIVE ? from - net : net - from);
}

/* Whether the turns have come to a mark. */
static int reached(int32_t turns, uint32_t mark)
{
	return turns >= 0 && (uint32_t)turns >= mark;
}

/* Whether the turns lie so far below a mark that its cue may come again. */
static int well_below(int32_t turns, uint32_t mark)
{
	return turns + (int32_t)rearmTurns <= (int32_t)mark;
}

/*
 * The first look beyond `done`, or 0 when none is left below the ease mark: so near the end the stop is the look. No
 * interval is too large to add up: done lies below 2^31, and the sum is at most done and one interval, or done twice.
 */
static uint32_t next_look(const struct turnline_plan *plan)
{
	uint32_t next = 0;
	if (plan->look > 0)
		next = (plan->look_done / plan->look + 1) * plan->look;
	if (plan->first > plan->look_done && (next == 0 || plan->first < next))
		next = plan->first;
	return next < plan->ease_at ? next : 0;
}

/* A look is called as early as a stop, but not before half its mark: it is a stop. */
static uint32_t look_called_at(const struct turnline_plan *plan, uint32_t mark)
{
	return mark - at_most(plan->stop_early, mark / 2);
}

/* The last look mark at or below a count. */
static uint32_t look_behind(const struct turnline_plan *plan, int32_t turns)
{
	uint32_t count = turns > 0 ? (uint32_t)turns : 0;
	uint32_t mark = plan->look > 0 ? count / plan->look * plan->look : 0;
	return plan->first <= count ? at_least(mark, plan->first) : mark;
}

int plan_set(struct turnline *winder, const struct command *set)
{
	struct turnline_plan *plan = &winder->plan;
	uint8_t negative = set->target < set->from ? PLAN_NEGATIVE : 0;
	uint32_t up = (uint32_t)set->target - (uint32_t)set->from;
	uint32_t target = negative ? 0u - up : up;
	uint32_t half;
	int same_coil = (plan->bits & PLAN_HELD) && plan->from == set->from && (plan->bits & PLAN_NEGATIVE) == negative;
	int same_target = same_coil && plan->target == target;
	int32_t turns;
	if (target == 0 || target > turnsMax)
		return 0;
	half = target - target / 2;
	plan->from = set->from;
	plan->target = target;
	plan->look = set->look;
	plan->first = set->first;
	plan->stop_early = at_most(set->stop, target);
	plan->stop_at = at_least(target - plan->stop_early, half);
	plan->ease_at = at_least(target - at_least(at_most(set->ease, target), plan->stop_early), half);
	/* The same coil told again calls nothing twice; a moved target does. */
	if (!same_target)
		plan->bits = (uint8_t)(PLAN_HELD | negative);
	turns = turns_of(winder);
	if (!same_coil)
		plan->look_done = look_behind(plan, turns);
	/* A target moved below the count is over at once. */
	plan_call_out(winder);
	return 1;
}

static void call(struct turnline *winder, int32_t turns, uint32_t mark, uint8_t called, uint8_t kind)
{
	struct turnline_plan *plan = &winder->plan;
	if (!reached(turns, mark)) {
		if (well_below(turns, mark))
			plan->bits &= (uint8_t)~called;
	} else if (!(plan->bits & called)) {
		plan->bits |= called;
		raise_event(winder, kind);
	}
}

static void call_looks(struct turnline *winder, int32_t turns)
{
	struct turnline_plan *plan = &winder->plan;
	uint32_t mark = next_look(plan);
	while (mark > 0 && reached(turns, mark + lookPassedAfterTurns + 1)) {
		/* Nobody stood still for it: the maker winds on, and the next look is ahead. */
		plan->look_done = mark;
		plan->bits &= (uint8_t)~PLAN_LOOK;
		mark = next_look(plan);
	}
	if (mark > 0 && !reached(turns, plan->ease_at))
		call(winder, turns, look_called_at(plan, mark), PLAN_LOOK, KIND_LOOK);
}

/* The count changed, or the plan did: an event for each mark newly reached. */
void plan_call_out(struct turnline *winder)
{
	struct turnline_plan *plan = &winder->plan;
	int32_t turns;
	if (!(plan->bits & PLAN_HELD))
		return;
	turns = turns_of(winder);
	/* A count far outside of the coil is another coil's: nothing to call, and nothing that could add up wrongly. */
	if (turns > 2 * (int32_t)turnsMax || turns < -2 * (int32_t)turnsMax)
		return;
	call(winder, turns, plan->ease_at, PLAN_EASE, KIND_EASE);
	if (plan->look_done > 0 && well_below(turns, look_called_at(plan, plan->look_done))) {
		plan->look_done = look_behind(plan, turns);
		plan->bits &= (uint8_t)~PLAN_LOOK;
	}
	call_looks(winder, turns);
	call(winder, turns, plan->target, PLAN_AT, KIND_AT);
	call(winder, turns, plan->target + 1, PLAN_OVER, KIND_OVER);
}

/* The spindle came to a stand: a look that was called is being taken. */
void plan_stood(struct turnline *winder)
{
	struct turnline_plan *plan = &winder->plan;
	if (turnline_cue_now(winder) != TURNLINE_CUE_LOOK)
		return;
	plan->look_done = next_look(plan);
	plan->bits &= (uint8_t)~PLAN_LOOK;
}

enum turnline_cue turnline_cue_now(const struct turnline *winder)
{
	const struct turnline_plan *plan = &winder->plan;
	int turning = winder->bits & BIT_TURNING;
	uint32_t mark;
	int32_t turns;
	if (!(plan->bits & PLAN_HELD))
		return TURNLINE_CUE_NONE;
	turns = turns_of(winder);
	if (reached(turns, plan->target + 1))
		return TURNLINE_CUE_OVER;
	if (reached(turns, plan->stop_at))
		return turning ? TURNLINE_CUE_STOP : TURNLINE_CUE_NONE;
	if (reached(turns, plan->ease_at))
		return turning ? TURNLINE_CUE_EASE : TURNLINE_CUE_NONE;
	mark = next_look(plan);
	return mark > 0 && reached(turns, look_called_at(plan, mark)) ? TURNLINE_CUE_LOOK : TURNLINE_CUE_NONE;
}
