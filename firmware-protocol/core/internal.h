/* What the files of the core share. Not for the board's own code. */
#ifndef TURNLINE_INTERNAL_H
#define TURNLINE_INTERNAL_H

#include "turnline.h"

/* A static assertion in C99: an array of a negative size does not compile. */
#define TURNLINE_ASSERT(name, holds) typedef char turnline_assert_##name[(holds) ? 1 : -1]

/* Up to four letters as one number: no table of texts, which an 8-bit board would copy into its RAM. */
#define LETTERS(a, b, c, d)                                                                                            \
	(((uint32_t)(a) << 24) | ((uint32_t)(b) << 16) | ((uint32_t)(c) << 8) | (uint32_t)(unsigned char)(d))

/* Low 16 bits of a clock or counter: enough for spans of less than a minute that are looked at in every poll. */
#define LOW16(value) ((uint16_t)((value)&0xFFFFu))

/* struct turnline: bits */
#define BIT_LINKED 0x01u
#define BIT_TURNING 0x02u
#define BIT_REVERSE 0x04u      /* heading of the last pulse seen */
#define BIT_ACKNOWLEDGED 0x08u /* the host acknowledged something of this boot */
#define BIT_RETAINED 0x10u     /* retained_… hold a boot before this one */
#define BIT_HELD 0x20u
#define BIT_STOP_ASKED 0x40u
#define BIT_SILENT 0x80u /* the host was not heard for watchdog_ms */

/* struct turnline: more_bits */
#define BIT_SET_BEFORE 0x01u /* newest_set holds the id of a SET acted on */
#define BIT_DROPPING 0x02u   /* the line being received is spoilt: wait for its LF */
#define BIT_STOP_RAN 0x04u   /* the time a stop is asked for at least has run out */
#define BIT_POLLED 0x08u     /* the clock has been told */

/* struct turnline: to_say */
#define SAY_HI 0x01u
#define SAY_NO_VERB 0x02u
#define SAY_NO_BOOT 0x04u
#define SAY_NO_GONE 0x08u
#define SAY_NO_UNWIRED 0x10u
#define SAY_LOOSE_ANSWER 0x20u
#define SAY_LOOSE_TICK 0x40u /* a tick of now that the ring has no room to keep */

/* struct turnline_plan: bits */
#define PLAN_HELD 0x01u
#define PLAN_NEGATIVE 0x02u /* wound so that the net falls */
#define PLAN_EASE 0x04u     /* called out, until the count falls well below */
#define PLAN_AT 0x08u
#define PLAN_OVER 0x10u
#define PLAN_LOOK 0x20u

/* What a command is answered: the low bits of an answer, 0 where none is kept. ANSWER_DUE: it has not been sent. */
#define ANSWER_NONE 0u
#define ANSWER_OK 1u
#define ANSWER_BOOT 2u
#define ANSWER_VERB 3u
#define ANSWER_RANGE 4u
#define ANSWER_GONE 5u
#define ANSWER_OLD 6u
#define ANSWER_UNWIRED 7u
#define ANSWER_DUE 0x80u

/* Kinds of kept line: 0 is a tick, the others are events. */
enum kind { KIND_TICK, KIND_GO, KIND_STOP, KIND_REV, KIND_EASE, KIND_LOOK, KIND_AT, KIND_OVER, KIND_BTN, KIND_BUFOV };

/* The totals and clocks a kept line carries. */
struct line_values {
	uint32_t n;
	uint32_t e;
	uint32_t f;
	uint32_t v;
	uint32_t t;
	uint32_t x;
	uint32_t g;
	int16_t r;
	uint8_t kind;
};

/* A plan or another command as read from a line. Which members hold something depends on the verb. */
enum verb { VERB_NONE, VERB_ASK, VERB_SET, VERB_STOP, VERB_ACK, VERB_SYNC, VERB_HOLD, VERB_TIME };
struct command {
	enum verb verb;
	uint8_t has_id;
	uint8_t has_boot;
	uint32_t id;
	uint32_t boot;
	uint32_t n;
	uint32_t e;
	int32_t target;
	int32_t from;
	uint32_t look;
	uint32_t first;
	uint32_t ease;
	uint32_t stop;
	uint32_t amount; /* ms of HOLD, u of TIME */
};

/* Why a line is not acted on, in the words of PROTOCOL.md. A device tells the variants of checksum not apart. */
enum refusal {
	READ_OK,
	READ_NOTHING, /* an empty line or a comment */
	REFUSED_TOO_LONG,
	REFUSED_NOT_ASCII,
	REFUSED_FORM,
	REFUSED_NO_CHECKSUM,
	REFUSED_CHECKSUM,
	REFUSED_VERB,
	REFUSED_DUPLICATE_KEY,
	REFUSED_MISSING_KEY,
	REFUSED_RANGE
};

/* bits.c */
int32_t signed_of(uint32_t value);
uint32_t get_bytes(const unsigned char *from, uint8_t bytes);
void put_bytes(unsigned char *to, uint8_t bytes, uint32_t value);
uint16_t crc_over(const unsigned char *bytes, size_t length);

/* read.c: `text` is a line without its LF; `key` tells the key at fault as LETTERS, 0 where none is. */
enum refusal read_line(const char *text, size_t length, struct command *command, uint32_t *key);

/* write.c: each writes a whole line with its LF and returns its length. */
size_t write_hi(const struct turnline *winder, char *out);
size_t write_kept(const struct turnline *winder, const struct line_values *values, char *out);
size_t write_answer(const struct turnline *winder, uint8_t answer, int has_id, uint32_t id, char *out);
size_t write_bye(const struct turnline *winder, char *out);

/* sensor.c */
struct counted {
	uint32_t forward;
	uint32_t reverse;
	uint32_t refused;
	uint32_t period_us;
	uint16_t missed;
	uint16_t pulses;
	int8_t heading;
	uint8_t changes;
};
void sensor_begin(struct turnline_sensor *sensor, const struct turnline_config *config, uint8_t levels);
void sensor_read(const struct turnline_sensor *sensor, struct counted *counted);

/* ring.c */
int ring_is_event(const unsigned char *record);
uint8_t ring_kind(const unsigned char *record);
void ring_values(const struct turnline *winder, const unsigned char *record, struct line_values *values);
void ring_add(struct turnline *winder, uint8_t kind);
int ring_add_tick(struct turnline *winder);
int ring_make_room(struct turnline *winder);
int ring_holds(const struct turnline *winder, uint8_t kind);
void ring_forget_old(struct turnline *winder);
void ring_forget_ticks(struct turnline *winder);
void ring_free(struct turnline *winder, uint32_t n, uint32_t e);
int ring_resend_after(struct turnline *winder, uint32_t e);
void ring_mark_unheard(struct turnline *winder);
void ring_mark_for_link(struct turnline *winder);
void ring_unmark(struct turnline *winder);
unsigned char *ring_live(struct turnline *winder);
unsigned char *ring_replay(struct turnline *winder);
void ring_handed(unsigned char *record);

/* plan.c */
int plan_set(struct turnline *winder, const struct command *set);
void plan_call_out(struct turnline *winder);
void plan_stood(struct turnline *winder);

/* device.c */
void raise_event(struct turnline *winder, uint8_t kind);

/* commands.c */
void obey(struct turnline *winder, const struct command *command);
void answer_refused(struct turnline *winder, enum refusal why, const struct command *command);
void stop_pass(struct turnline *winder);

#endif
