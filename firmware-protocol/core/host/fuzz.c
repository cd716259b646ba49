/*
 * A libFuzzer target: bytes of a host, of any kind and cut anywhere, between edges and time. The first byte of the input
 * picks how the winder is built; then each FE takes the next byte as an edge and a step of time, FD ends the line with
 * its right checksum, which chance would hardly find, and all else is received. What comes out must be lines of at most
 * lineBytesMax bytes that end in LF and hold nothing else below a space.
 */
#include <stdio.h>
#include <stdlib.h>

#include "../turnline.h"

static const struct turnline_config configs[] = {
	{"fuzzed", "1.0.0", 1, 1200, 100, 1, TURNLINE_STOP_COMMAND | TURNLINE_STOP_MARK, 5000},
	{"fuzzed", NULL, 20, 600, 10, 0, 0, 0},
};

static void check_out(struct turnline *winder)
{
	char line[lineBytesMax];
	size_t length;
	while ((length = turnline_next(winder, line)) > 0) {
		size_t at;
		if (length > lineBytesMax || line[length - 1] != '\n')
			abort();
		for (at = 0; at + 1 < length; at++) {
			if (line[at] < ' ' || line[at] > '~')
				abort();
		}
	}
}

static void end_line(struct turnline *winder, const char *text, size_t length)
{
	char end[8];
	int at;
	snprintf(end, sizeof end, " ~%04X\n", (unsigned)turnline_body_crc(text, length));
	for (at = 0; at < 7; at++)
		turnline_receive(winder, (uint8_t)end[at]);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);
int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct turnline winder;
	uint32_t now_us = 0;
	size_t line_at = 1;
	size_t at;
	if (size == 0)
		return 0;
	turnline_begin(&winder, &configs[data[0] & 1u], UINT32_C(0x5C0E91A7), 0, NULL);
	turnline_poll(&winder, 0);
	turnline_link(&winder, 1);
	for (at = 1; at < size; at++) {
		if (data[at] == 0xFEu && at + 1 < size) {
			uint8_t step = data[++at];
			line_at = at + 1;
			now_us += (uint32_t)(step >> 2) * 4000u;
			turnline_edge(&winder, step & 3u, now_us);
			turnline_poll(&winder, now_us / 1000u);
			check_out(&winder);
		} else if (data[at] == 0xFDu) {
			end_line(&winder, (const char *)data + line_at, at - line_at);
			line_at = at + 1;
		} else {
			turnline_receive(&winder, data[at]);
			if (data[at] == '\n')
				line_at = at + 1;
		}
	}
	turnline_poll(&winder, now_us / 1000u + 5u);
	check_out(&winder);
	return 0;
}
