/* Lines of the winder: keys in the order of PROTOCOL.md, the checksum, LF. */
#include "internal.h"

/* " ~", four digits and LF. */
#define CHECKSUM_BYTES 7u
#define BODY_BYTES_MAX (lineBytesMax - CHECKSUM_BYTES)

struct writer {
	char *to;
	uint8_t length;
	uint8_t overrun;
};

TURNLINE_ASSERT(a_line_is_counted_in_8_bits, lineBytesMax <= 255);

static void put_char(struct writer *writer, char c)
{
	if (writer->length >= BODY_BYTES_MAX)
		writer->overrun = 1;
	else
		writer->to[writer->length++] = c;
}

static void put_letters(struct writer *writer, uint32_t letters)
{
	while (letters != 0) {
		char c = (char)(letters >> 24);
		if (c != 0)
			put_char(writer, c);
		letters <<= 8;
	}
}

static void put_key(struct writer *writer, uint32_t key)
{
	put_char(writer, ' ');
	put_letters(writer, key);
	put_char(writer, '=');
}

static void put_u32(struct writer *writer, uint32_t value)
{
	char digits[10];
	uint8_t count = 0;
	do {
		digits[count++] = (char)('0' + (char)(value % 10));
		value /= 10;
	} while (value > 0);
	while (count > 0)
		put_char(writer, digits[--count]);
}

static char hex_digit(uint8_t value)
{
	return (char)(value < 10 ? '0' + value : 'A' - 10 + value);
}

static void put_number(struct writer *writer, uint32_t key, uint32_t value)
{
	put_key(writer, key);
	put_u32(writer, value);
}

static void put_rpm(struct writer *writer, int16_t rpm)
{
	put_key(writer, LETTERS('r', 0, 0, 0));
	if (rpm < 0)
		put_char(writer, '-');
	put_u32(writer, (uint32_t)(rpm < 0 ? -(int32_t)rpm : (int32_t)rpm));
}

static void put_boot(struct writer *writer, uint32_t key, uint32_t boot)
{
	uint8_t digit;
	put_key(writer, key);
	for (digit = 0; digit < 8; digit++)
		put_char(writer, hex_digit((uint8_t)((boot >> (28 - 4 * digit)) & 0xFu)));
}

static void put_word(struct writer *writer, uint32_t key, const char *word)
{
	put_key(writer, key);
	while (*word)
		put_char(writer, *word++);
}

static void begin(struct writer *writer, char *out, uint32_t verb)
{
	writer->to = out;
	writer->length = 0;
	writer->overrun = 0;
	put_letters(writer, verb);
}

static size_t finish(struct writer *writer)
{
	uint16_t crc = turnline_body_crc(writer->to, writer->length);
	char *end = writer->to + writer->length;
	uint8_t digit;
	*end++ = ' ';
	*end++ = '~';
	for (digit = 0; digit < 4; digit++)
		*end++ = hex_digit((uint8_t)((uint8_t)(crc >> (12 - 4 * digit)) & 0xFu));
	*end = '\n';
	return (size_t)writer->length + CHECKSUM_BYTES;
}

static void put_totals(struct writer *writer, uint32_t n, uint32_t e, uint32_t f, uint32_t v)
{
	put_number(writer, LETTERS('n', 0, 0, 0), n);
	put_number(writer, LETTERS('e', 0, 0, 0), e);
	put_number(writer, LETTERS('f', 0, 0, 0), f);
	put_number(writer, LETTERS('v', 0, 0, 0), v);
}

/* What a HI may leave out, in the order in which it goes where the line would be too long. */
#define LEFT_FW 1
#define LEFT_REP 2
#define LEFT_BUF 3
#define LEFT_PPR 4
#define LEFT_DIR 5
#define LEFT_R 6

static int hi_body(struct writer *writer, const struct turnline *winder, char *out, uint8_t left_out)
{
	const struct turnline_config *config = winder->config;
	begin(writer, out, LETTERS('H', 'I', 0, 0));
	put_number(writer, LETTERS('p', 0, 0, 0), protocolVersion);
	put_word(writer, LETTERS('d', 'e', 'v', 0), config->name);
	if (config->firmware != NULL && left_out < LEFT_FW)
		put_word(writer, LETTERS('f', 'w', 0, 0), config->firmware);
	put_boot(writer, LETTERS('b', 0, 0, 0), winder->boot);
	put_totals(writer, winder->line_number, winder->event_number, winder->forward, winder->reverse);
	if (left_out < LEFT_R)
		put_rpm(writer, turnline_rpm(winder));
	put_number(writer, LETTERS('t', 0, 0, 0), winder->now_ms);
	if (left_out < LEFT_PPR)
		put_number(writer, LETTERS('p', 'p', 'r', 0), config->pulses_per_turn);
	if (left_out < LEFT_DIR)
		put_number(writer, LETTERS('d', 'i', 'r', 0), config->sees_direction ? 1 : 0);
	if (left_out < LEFT_REP)
		put_number(writer, LETTERS('r', 'e', 'p', 0), config->report_ms);
	if (left_out < LEFT_BUF)
		put_number(writer, LETTERS('b', 'u', 'f', 0), TURNLINE_RING_LINES);
	if (winder->bits & BIT_RETAINED) {
		put_boot(writer, LETTERS('p', 'b', 0, 0), winder->retained_boot);
		put_number(writer, LETTERS('p', 'f', 0, 0), winder->retained_forward);
		put_number(writer, LETTERS('p', 'v', 0, 0), winder->retained_reverse);
	}
	return !writer->overrun;
}

size_t write_hi(const struct turnline *winder, char *out)
{
	struct writer writer;
	uint8_t left_out = 0;
	while (!hi_body(&writer, winder, out, left_out) && left_out < LEFT_R)
		left_out++;
	return finish(&writer);
}

static void put_kind(struct writer *writer, uint8_t kind)
{
	put_key(writer, LETTERS('k', 0, 0, 0));
	switch (kind) {
	case KIND_GO:
		put_letters(writer, LETTERS('g', 'o', 0, 0));
		return;
	case KIND_STOP:
		put_letters(writer, LETTERS('s', 't', 'o', 'p'));
		return;
	case KIND_REV:
		put_letters(writer, LETTERS('r', 'e', 'v', 0));
		return;
	case KIND_EASE:
		put_letters(writer, LETTERS('e', 'a', 's', 'e'));
		return;
	case KIND_LOOK:
		put_letters(writer, LETTERS('l', 'o', 'o', 'k'));
		return;
	case KIND_AT:
		put_letters(writer, LETTERS('a', 't', 0, 0));
		return;
	case KIND_OVER:
		put_letters(writer, LETTERS('o', 'v', 'e', 'r'));
		return;
	case KIND_BTN:
		put_letters(writer, LETTERS('b', 't', 'n', 0));
		return;
	default:
		put_letters(writer, LETTERS('b', 'u', 'f', 'o'));
		put_char(writer, 'v');
		return;
	}
}

size_t write_kept(const struct turnline *winder, const struct line_values *values, char *out)
{
	struct writer writer;
	begin(&writer, out, values->kind == KIND_TICK ? LETTERS('T', 0, 0, 0) : LETTERS('E', 0, 0, 0));
	put_boot(&writer, LETTERS('b', 0, 0, 0), winder->boot);
	put_totals(&writer, values->n, values->e, values->f, values->v);
	put_rpm(&writer, values->r);
	put_number(&writer, LETTERS('t', 0, 0, 0), values->t);
	if (values->kind != KIND_TICK)
		put_kind(&writer, values->kind);
	if (values->x > 0)
		put_number(&writer, LETTERS('x', 0, 0, 0), values->x);
	if (values->g > 0)
		put_number(&writer, LETTERS('g', 0, 0, 0), values->g);
	return finish(&writer);
}

static void put_why(struct writer *writer, uint8_t answer)
{
	put_key(writer, LETTERS('w', 'h', 'y', 0));
	switch (answer) {
	case ANSWER_BOOT:
		put_letters(writer, LETTERS('b', 'o', 'o', 't'));
		return;
	case ANSWER_VERB:
		put_letters(writer, LETTERS('v', 'e', 'r', 'b'));
		return;
	case ANSWER_RANGE:
		put_letters(writer, LETTERS('r', 'a', 'n', 'g'));
		put_char(writer, 'e');
		return;
	case ANSWER_GONE:
		put_letters(writer, LETTERS('g', 'o', 'n', 'e'));
		return;
	case ANSWER_OLD:
		put_letters(writer, LETTERS('o', 'l', 'd', 0));
		return;
	default:
		put_letters(writer, LETTERS('u', 'n', 'w', 'i'));
		put_letters(writer, LETTERS('r', 'e', 'd', 0));
		return;
	}
}

size_t write_answer(const struct turnline *winder, uint8_t answer, int has_id, uint32_t id, char *out)
{
	struct writer writer;
	begin(&writer, out, answer == ANSWER_OK ? LETTERS('O', 'K', 0, 0) : LETTERS('N', 'O', 0, 0));
	put_boot(&writer, LETTERS('b', 0, 0, 0), winder->boot);
	if (has_id)
		put_number(&writer, LETTERS('i', 'd', 0, 0), id);
	if (answer != ANSWER_OK)
		put_why(&writer, answer);
	return finish(&writer);
}

size_t write_bye(const struct turnline *winder, char *out)
{
	struct writer writer;
	begin(&writer, out, LETTERS('B', 'Y', 'E', 0));
	put_boot(&writer, LETTERS('b', 0, 0, 0), winder->boot);
	return finish(&writer);
}
