/*
 * The core's reader and writer by themselves, so that they can be held against the other implementation. One request a
 * line on standard input, one answer a line on standard output:
 *
 *	R <text>                                     a host's line: "nothing", "refused <why> [key]", or verb and values
 *	T <b> <n> <e> <f> <v> <r> <t> <x> <g>        the tick with these values
 *	E <b> <n> <e> <f> <v> <r> <t> <x> <g> <kind> the event; the kind by its number in enum kind
 *	A <b> <answer> <id or ->                     the answer, by its number among ANSWER_…
 *	H <name> <fw or -> <b> <n> <e> <f> <v> <period us> <t> <ppr> <dir> <rep> <pb or -> <pf> <pv>
 *	B <b>                                        BYE
 *	C <text>                                     the checksum of the text
 *	K <n> <e> <f> <v> <t> <x> <g> <kind>         each number grows by so much, then a line is kept; answers nothing
 *	L                                            every kept line as it would be sent, then "end"
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "../internal.h"

static const struct turnline_config plain = {"kept", NULL, 1, 1200, 100, 1, 0, 0};
static struct turnline winder;

static const char *why_text(enum refusal why)
{
	switch (why) {
	case REFUSED_TOO_LONG:
		return "too-long";
	case REFUSED_NOT_ASCII:
		return "not-ascii";
	case REFUSED_FORM:
		return "form";
	case REFUSED_NO_CHECKSUM:
		return "no-checksum";
	case REFUSED_CHECKSUM:
		return "checksum";
	case REFUSED_VERB:
		return "verb";
	case REFUSED_DUPLICATE_KEY:
		return "duplicate-key";
	case REFUSED_MISSING_KEY:
		return "missing-key";
	default:
		return "range";
	}
}

static void print_command(const struct command *is)
{
	static const char *const verbs[] = {"", "?", "SET", "STOP", "ACK", "SYNC", "HOLD", "TIME"};
	printf("%s", verbs[is->verb]);
	if (is->has_id)
		printf(" id=%lu", (unsigned long)is->id);
	if (is->has_boot)
		printf(" b=%08lX", (unsigned long)is->boot);
	if (is->verb == VERB_SET)
		printf(" tgt=%ld look=%lu ease=%lu stop=%lu from=%ld fst=%lu", (long)is->target, (unsigned long)is->look,
		       (unsigned long)is->ease, (unsigned long)is->stop, (long)is->from, (unsigned long)is->first);
	if (is->verb == VERB_ACK)
		printf(" n=%lu", (unsigned long)is->n);
	if (is->verb == VERB_ACK || is->verb == VERB_SYNC)
		printf(" e=%lu", (unsigned long)is->e);
	if (is->verb == VERB_HOLD)
		printf(" ms=%lu", (unsigned long)is->amount);
	if (is->verb == VERB_TIME)
		printf(" u=%lu", (unsigned long)is->amount);
	printf("\n");
}

static void print_read(const char *text)
{
	struct command command;
	uint32_t key;
	enum refusal why = read_line(text, strlen(text), &command, &key);
	if (why == READ_OK) {
		print_command(&command);
	} else if (why == READ_NOTHING) {
		printf("nothing\n");
	} else {
		printf("refused %s", why_text(why));
		if (key != 0)
			printf(" ");
		for (; key != 0; key = (key << 8) & UINT32_C(0xFFFFFFFF))
			if (key >> 24)
				printf("%c", (char)(key >> 24));
		printf("\n");
	}
}

static uint32_t number(void)
{
	return (uint32_t)strtoul(strtok(NULL, " "), NULL, 10);
}

static uint32_t hex(void)
{
	return (uint32_t)strtoul(strtok(NULL, " "), NULL, 16);
}

static size_t write_values(char *out, int event)
{
	struct line_values values;
	winder.boot = hex();
	values.n = number();
	values.e = number();
	values.f = number();
	values.v = number();
	values.r = (int16_t)atoi(strtok(NULL, " "));
	values.t = number();
	values.x = number();
	values.g = number();
	values.kind = event ? (uint8_t)number() : (uint8_t)KIND_TICK;
	return write_kept(&winder, &values, out);
}

static size_t write_birth(char *out)
{
	static struct turnline_config config;
	char *word;
	config.name = strtok(NULL, " ");
	word = strtok(NULL, " ");
	config.firmware = strcmp(word, "-") == 0 ? NULL : word;
	winder.config = &config;
	winder.boot = hex();
	winder.line_number = number();
	winder.event_number = number();
	winder.forward = number();
	winder.reverse = number();
	winder.period_us = number();
	winder.now_ms = number();
	config.pulses_per_turn = (uint16_t)number();
	config.sees_direction = (uint8_t)number();
	config.report_ms = (uint16_t)number();
	winder.bits = BIT_TURNING;
	word = strtok(NULL, " ");
	if (strcmp(word, "-") != 0) {
		winder.bits |= BIT_RETAINED;
		winder.retained_boot = (uint32_t)strtoul(word, NULL, 16);
		winder.retained_forward = number();
		winder.retained_reverse = number();
	}
	return write_hi(&winder, out);
}

static size_t write_answered(char *out)
{
	uint8_t answer;
	char *id;
	winder.boot = hex();
	answer = (uint8_t)number();
	id = strtok(NULL, " ");
	return write_answer(&winder, answer, strcmp(id, "-") != 0, (uint32_t)strtoul(id, NULL, 10), out);
}

static void keep(void)
{
	uint8_t kind;
	winder.config = &plain;
	winder.line_number += number();
	winder.event_number += number();
	winder.forward += number();
	winder.reverse += number();
	winder.now_ms += number();
	winder.refused += number();
	winder.missed = (uint16_t)(winder.missed + number());
	kind = (uint8_t)number();
	ring_forget_old(&winder);
	if (kind == KIND_TICK) {
		ring_add_tick(&winder);
	} else {
		ring_make_room(&winder);
		winder.event_number++;
		ring_add(&winder, kind);
	}
}

static void print_kept(void)
{
	uint16_t at;
	for (at = 0; at < winder.kept; at++) {
		char out[lineBytesMax];
		struct line_values values;
		ring_values(&winder, winder.ring[at], &values);
		fwrite(out, 1, write_kept(&winder, &values, out), stdout);
	}
	printf("end\n");
}

int main(void)
{
	static char text[1024];
	while (fgets(text, sizeof text, stdin) != NULL) {
		char out[lineBytesMax];
		size_t length = 0;
		text[strcspn(text, "\n")] = '\0';
		if (text[0] == 'R') {
			print_read(text + 2);
			continue;
		}
		if (text[0] == 'C') {
			printf("%04X\n", (unsigned)turnline_body_crc(text + 2, strlen(text + 2)));
			continue;
		}
		strtok(text, " ");
		if (text[0] == 'K') {
			keep();
			continue;
		}
		if (text[0] == 'L') {
			print_kept();
			continue;
		}
		if (text[0] == 'T' || text[0] == 'E')
			length = write_values(out, text[0] == 'E');
		else if (text[0] == 'A')
			length = write_answered(out);
		else if (text[0] == 'H')
			length = write_birth(out);
		else if (text[0] == 'B') {
			winder.boot = hex();
			length = turnline_bye(&winder, out);
		}
		fwrite(out, 1, length, stdout);
	}
	return 0;
}
