/*
 * Edges to turns: the interrupt's side. One writer, the interrupt; the main loop copies what it needs and copies again
 * when `changes` moved meanwhile, so no interrupt is ever held off. `standing` and `settled` go the other way, one byte
 * each: the main loop sets them, the interrupt clears them.
 */
#include "internal.h"

#define SEES_DIRECTION 0x01u
#define IN_DOUBT 0x02u /* the last period was twice its neighbours */
#define PARTLY 0x04u   /* the passage under way did not begin in front of the magnet */

/* Longer than a turning spindle ever waits: the clock may have wrapped, nothing is known. */
#define PERIOD_US_MAX UINT32_C(10000000)

void sensor_begin(struct turnline_sensor *sensor, const struct turnline_config *config, uint8_t levels)
{
	/* Half the shortest period the spindle can reach. Divided twice, so that 32 bits hold everything. */
	uint32_t closest_us = UINT32_C(30000000) / config->rpm_max / config->pulses_per_turn;
	uint32_t left_us = closest_us / 2;
	sensor->closest_us = closest_us;
	sensor->left_us = (uint16_t)(left_us > leftUsMax ? leftUsMax : left_us);
	sensor->pulses_per_turn = config->pulses_per_turn;
	sensor->levels = (uint8_t)(levels & (config->sees_direction ? TURNLINE_A | TURNLINE_B : TURNLINE_A));
	sensor->bits = (uint8_t)((config->sees_direction ? SEES_DIRECTION : 0u) | (sensor->levels ? PARTLY : 0u));
	sensor->heading = 1;
	sensor->standing = 1;
	sensor->settled = 1;
}

/* Steps of a passage that has no end because the changes come faster than they are looked at. */
#define TRAVELLED_MAX 100

/* |a − b| at most 15 % of b. Both at most PERIOD_US_MAX, so that 20 times fits. */
static int near(uint32_t a, uint32_t b)
{
	return (a > b ? a - b : b - a) * 20 <= b * 3;
}

/* A single period twice its neighbours is a magnet that went by unseen: suspected, never added to the count. */
static void measure(struct turnline_sensor *sensor, uint32_t period_us)
{
	if (period_us > PERIOD_US_MAX) {
		sensor->period_us = sensor->before_us = 0;
		sensor->bits &= (uint8_t)~IN_DOUBT;
		return;
	}
	if (sensor->bits & IN_DOUBT) {
		if (near(period_us, sensor->period_us / 2) && sensor->missed < 0xFFFFu)
			sensor->missed++;
		sensor->bits &= (uint8_t)~IN_DOUBT;
	} else if (sensor->period_us != 0 && sensor->before_us != 0 && near(sensor->period_us, sensor->before_us) &&
	           near(period_us, 2 * sensor->period_us)) {
		sensor->bits |= IN_DOUBT;
	}
	sensor->before_us = sensor->period_us;
	sensor->period_us = period_us;
}

static void pulse(struct turnline_sensor *sensor, int8_t way, uint32_t now_us)
{
	if (sensor->standing) {
		sensor->standing = 0;
		sensor->period_us = sensor->before_us = 0;
		sensor->bits &= (uint8_t)~IN_DOUBT;
	} else {
		measure(sensor, now_us - sensor->last_us);
	}
	sensor->last_us = now_us;
	sensor->heading = way;
	sensor->pulses++;
	/* A turn is as many pulses one way as there are magnets: rocking over a magnet in between counts nothing. */
	sensor->partial += way;
	if (sensor->partial == (int32_t)sensor->pulses_per_turn) {
		sensor->partial = 0;
		sensor->forward++;
	} else if (sensor->partial == -(int32_t)sensor->pulses_per_turn) {
		sensor->partial = 0;
		sensor->reverse++;
	}
}

/* One sensor: its output going on is a pulse, unless it comes too soon after the last pulse or after it went off. */
static void one_sensor(struct turnline_sensor *sensor, uint8_t levels, uint8_t settled, uint32_t now_us)
{
	if (!(levels & TURNLINE_A)) {
		sensor->mark_us = now_us;
	} else if (!settled && (now_us - sensor->mark_us < sensor->left_us ||
	                        (!sensor->standing && now_us - sensor->last_us < sensor->closest_us))) {
		sensor->refused++;
	} else {
		pulse(sensor, 1, now_us);
	}
}

/*
 * Two sensors: A alone, both, B alone, none is a magnet passed forward. Only a whole passage counts, when both are off
 * again; a spindle rocked on a magnet's edge travels to and fro and comes to nothing. A change of both at once tells no
 * way; one such in a passage leaves two steps, which still say it, more leave none.
 */
static void two_sensors(struct turnline_sensor *sensor, uint8_t levels, uint32_t now_us)
{
	/* Where each level stands in the order of a passage: none 0, A 1, both 2, B 3. */
	uint8_t place = (uint8_t)(levels ^ (levels >> 1));
	uint8_t place_before = (uint8_t)(sensor->levels ^ (sensor->levels >> 1));
	uint8_t step = (uint8_t)((place - place_before) & 3);
	if (step == 1 && sensor->travelled < TRAVELLED_MAX)
		sensor->travelled++;
	else if (step == 3 && sensor->travelled > -TRAVELLED_MAX)
		sensor->travelled--;
	if (levels == 0) {
		int8_t travelled = sensor->travelled;
		sensor->travelled = 0;
		if (sensor->bits & PARTLY)
			sensor->bits &= (uint8_t)~PARTLY;
		else if (travelled >= 2)
			pulse(sensor, 1, now_us);
		else if (travelled <= -2)
			pulse(sensor, -1, now_us);
		else if (now_us - sensor->mark_us < sensor->left_us)
			sensor->refused++;
	} else if (sensor->levels == 0) {
		sensor->mark_us = now_us;
	}
}

void turnline_edge(struct turnline *winder, uint8_t levels, uint32_t now_us)
{
	struct turnline_sensor *sensor = &winder->sensor;
	uint8_t settled = sensor->settled;
	int two = sensor->bits & SEES_DIRECTION;
	levels = (uint8_t)(levels & (two ? TURNLINE_A | TURNLINE_B : TURNLINE_A));
	if (levels == sensor->levels)
		return;
	sensor->changes++;
	sensor->settled = 0;
	if (two)
		two_sensors(sensor, levels, now_us);
	else
		one_sensor(sensor, levels, settled, now_us);
	sensor->levels = levels;
}

void sensor_read(const struct turnline_sensor *sensor, struct counted *counted)
{
	/* Volatile, so that the copy stands between the two looks at `changes` also in the compiler's eyes. */
	const volatile struct turnline_sensor *from = sensor;
	do {
		counted->changes = from->changes;
		counted->forward = from->forward;
		counted->reverse = from->reverse;
		counted->refused = from->refused;
		counted->period_us = from->period_us;
		counted->missed = from->missed;
		counted->pulses = from->pulses;
		counted->heading = from->heading;
	} while (counted->changes != from->changes);
}
