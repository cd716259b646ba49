/*
 * Turnline 1 for a winder: count the turns of a spindle and tell a host, whatever the link does. PROTOCOL.md beside this
 * folder is normative. C99; allocates nothing, needs no library, no floating point, and nothing of the board but two
 * clocks, the levels of one or two pins and a way to send and receive bytes.
 *
 *	static struct turnline winder;
 *
 *	turnline_begin(&winder, &config, boot, levels, found);     once
 *	turnline_edge(&winder, levels, micros);                    in the interrupt of the sensor's pins
 *	for (;;) {                                                 the main loop, at least every 20 ms
 *		turnline_poll(&winder, millis);
 *		while (a byte came) turnline_receive(&winder, byte);
 *		while (there is room to send) length = turnline_next(&winder, line);
 *		turnline_retain(&winder, &kept);                       where memory survives a reset
 *	}
 *
 * Only turnline_edge may be called from an interrupt, on the processor core that runs the main loop. Everything else
 * belongs to the main loop alone.
 */
#ifndef TURNLINE_H
#define TURNLINE_H

#include <stddef.h>
#include <stdint.h>

/*
 * Limits of the protocol, under the names and with the values of the table "Limits" in PROTOCOL.md. A device acts on
 * some of them; the others are for the carrier around it.
 */
#define lineBytesMax 160
#define jsonLineCharsMax 512
#define verbCharsMax 4
#define keyCharsMax 4
#define valueCharsMax 40
#define wordCharsMax 16
#define holdMsMax 60000
#define linesPerSecondMax 20
#define burstLinesMax 600
#define replayLinesPerSecondMax 200
#define linksPerWinderMax 5
#define tickMsMax 1000
#define ringLinesMin 32
#define answersKeptMin 8
#define stopVoidMs 2000
#define httpLinesMax 500
#define httpBytesMax 65536
#define retryMsMax 250
#define messageLinesMax 50
#define messageBytesMax 16384
#define pingSeconds 20
#define serialBaud 115200

/* What a device decides for itself, as in the table "A device's own figures" in PROTOCOL.md. */
#define protocolVersion 1
#define standMsMin 500
#define standMsMax 3000
#define standUnknownMs 2000
#define standPeriods 3
#define eventResendMs 2000
#define eventResendLines 8
#define replayTickMs 1000
#define rearmTurns 5
#define lookPassedAfterTurns 30
#define turnsMax 10000000
#define leftUsMax 3000

/*
 * Lines the device can keep, said as `buf`. A kept line takes TURNLINE_RECORD_BYTES, so that the whole state stays within
 * 1 KiB with 32 lines and within 8 KiB with 256. Choose with -DTURNLINE_RING_LINES=256; the same for every file.
 */
#ifndef TURNLINE_RING_LINES
#define TURNLINE_RING_LINES 32
#endif
#define TURNLINE_RECORD_BYTES 20

/* Levels of the sensors: bit set while the output says that a magnet is near. Going forward A comes before B. */
#define TURNLINE_A 0x01u
#define TURNLINE_B 0x02u

/* What may ask for a stop on the output the maker wired (turnline_stop_wanted). None of these is an emergency stop. */
#define TURNLINE_STOP_COMMAND 0x01u /* the host's STOP */
#define TURNLINE_STOP_MARK 0x02u    /* the plan's own stop mark */

/* How the winder is built. Must stay in place and unchanged as long as the device runs. */
struct turnline_config {
	const char *name;         /* `dev`: 1 to 16 visible ASCII characters without space and ~ */
	const char *firmware;     /* `fw`: the same, or NULL */
	uint16_t pulses_per_turn; /* `ppr`: 1 to 65535; magnets on the spindle */
	uint16_t rpm_max;         /* 60 to 65535: the fastest the spindle can turn; pulses twice as fast are bouncing */
	uint16_t report_ms;       /* `rep`: 10 to 1000 (tickMsMax); milliseconds between ticks while turning, 100 is good */
	uint8_t sees_direction;   /* `dir`: 1 with two sensors, 0 with one */
	uint8_t stop_output;      /* TURNLINE_STOP_… together; 0: no stop output is wired, and STOP is answered `unwired` */
	/*
	 * Opt-in, 0: off. While the spindle turns and no line of the host came for so many milliseconds (1000 to 60000), the
	 * stop output asks for a stop. Needs a wired stop output. A host acknowledges several times a second while winding.
	 */
	uint16_t watchdog_ms;
};

/*
 * What a device puts into memory that survives a reset, for the `pb pf pv` of the next boot. `check` tells a memory that
 * holds nothing, or that was being written when the reset came, from a good one.
 */
struct turnline_retained {
	uint32_t boot;
	uint32_t forward;
	uint32_t reverse;
	uint16_t check;
};

/* What a lamp or a sound tells the maker. */
enum turnline_cue {
	TURNLINE_CUE_NONE,
	TURNLINE_CUE_LOOK, /* stop here and look at the coil */
	TURNLINE_CUE_EASE, /* ease off */
	TURNLINE_CUE_STOP, /* stop now */
	TURNLINE_CUE_OVER  /* beyond the target */
};

/* The interrupt's share of the state. */
struct turnline_sensor {
	uint32_t forward;
	uint32_t reverse;
	int32_t partial;
	uint32_t refused;
	uint32_t last_us;
	uint32_t mark_us;
	uint32_t period_us;
	uint32_t before_us;
	uint32_t closest_us;
	uint16_t left_us;
	uint16_t pulses_per_turn;
	uint16_t missed;
	uint16_t pulses;
	volatile uint8_t changes;
	volatile uint8_t standing;
	volatile uint8_t settled;
	uint8_t levels;
	int8_t travelled;
	int8_t heading;
	uint8_t bits;
};

/* A plan: marks in turns of its coil, counted from `from`. */
struct turnline_plan {
	int32_t from;
	uint32_t target;
	uint32_t look;
	uint32_t first;
	uint32_t ease_at;
	uint32_t stop_at;
	uint32_t stop_early;
	uint32_t look_done;
	uint8_t bits;
};

/* The whole state of a device. Declare one, static; read and change it through the functions below alone. */
struct turnline {
	const struct turnline_config *config;
	struct turnline_sensor sensor;
	struct turnline_plan plan;
	uint32_t boot;
	uint32_t now_ms;
	uint32_t line_number;
	uint32_t event_number;
	uint32_t forward;
	uint32_t reverse;
	uint32_t refused;
	uint32_t period_us;
	uint32_t retained_boot;
	uint32_t retained_forward;
	uint32_t retained_reverse;
	uint32_t newest_set;
	uint32_t loose_id;
	uint32_t hold_ms;
	uint32_t answer_ids[answersKeptMin];
	uint16_t missed;
	uint16_t pulses;
	uint16_t pulse_at;
	uint16_t tick_at;
	uint16_t resend_at;
	uint16_t replay_at;
	uint16_t stop_at;
	uint16_t heard_at;
	uint16_t kept;
	uint8_t answers[answersKeptMin];
	uint8_t answer_next;
	uint8_t loose_answer;
	uint8_t replay_credit;
	uint8_t changes_seen;
	uint8_t to_say;
	uint8_t bits;
	uint8_t more_bits;
	uint8_t heard_length;
	char heard[lineBytesMax - 1];
	unsigned char ring[TURNLINE_RING_LINES][TURNLINE_RECORD_BYTES];
};

/*
 * Starts a boot.
 *
 * boot    a number that differs from start to start: from noise, or a counter in EEPROM run through a mixer
 * levels  TURNLINE_A and TURNLINE_B as the pins say them now
 * found   what turnline_retain last put into surviving memory, good or not; NULL where none is
 */
void turnline_begin(struct turnline *winder, const struct turnline_config *config, uint32_t boot, uint8_t levels,
                    const struct turnline_retained *found);

/*
 * FROM THE INTERRUPT: a pin of the sensor changed. Takes a bounded handful of integer operations and never waits.
 *
 * levels  TURNLINE_A and TURNLINE_B as the pins say them now
 * now_us  a clock in microseconds that wraps at 2^32
 */
void turnline_edge(struct turnline *winder, uint8_t levels, uint32_t now_us);

/*
 * Time goes on: takes in what the interrupt counted, makes ticks and events. Call it at least every 20 ms, and before
 * turnline_receive and turnline_next, which act at the time it was told last.
 *
 * now_ms  milliseconds since the microcontroller started; wraps at 2^32
 */
void turnline_poll(struct turnline *winder, uint32_t now_ms);

/*
 * The link came up or went down. At a new link the birth line goes first, then what the host may not have. A serial line
 * that cannot tell is up from the beginning. After a batch that did not arrive, say down and up: everything that is not
 * acknowledged goes again.
 */
void turnline_link(struct turnline *winder, int up);

/* One byte of the host. A line is acted on when its LF comes. */
void turnline_receive(struct turnline *winder, uint8_t byte);

/*
 * The next line to send now, with its LF and without a NUL, or 0 when there is none.
 *
 * out  room for lineBytesMax bytes; may be shared with other uses, nothing is remembered in it
 * returns its length in bytes
 */
size_t turnline_next(struct turnline *winder, char *out);

/* The maker pressed the winder's button. */
void turnline_button(struct turnline *winder);

/* The last line before the device switches itself off, with its LF, into `out` (lineBytesMax bytes). Returns its length. */
size_t turnline_bye(const struct turnline *winder, char *out);

/*
 * Brings `kept` up to date with the totals continued to now; call it in each round of the main loop where memory survives
 * a reset. Writes only when something changed, and leaves the memory marked as bad while it writes.
 * Returns 1 when `kept` is good, 0 as long as no boot was acknowledged and none found.
 */
int turnline_retain(const struct turnline *winder, struct turnline_retained *kept);

/* What to tell the maker now; TURNLINE_CUE_NONE without a plan. */
enum turnline_cue turnline_cue_now(const struct turnline *winder);

/*
 * Whether the stop output asks the motor's controller to stop. It asks until the spindle has stood, for stopVoidMs at
 * least. That it no longer asks is never a start: the controller must need the maker's own hand or foot to run again.
 */
int turnline_stop_wanted(const struct turnline *winder);

/* Turns since boot as of the last poll; neither ever falls. */
uint32_t turnline_forward(const struct turnline *winder);
uint32_t turnline_reverse(const struct turnline *winder);

/* Signed revolutions a minute between the last two pulses; 0 standing, and after the first pulse. */
int16_t turnline_rpm(const struct turnline *winder);

/*
 * For boards without a sensor's interrupt and for tests of a port: `turnline_body_crc` is the checksum of a body,
 * CRC-16/IBM-3740.
 */
uint16_t turnline_body_crc(const char *body, size_t length);

#endif
