/*
 * The same hour on every machine: a winder driven by numbers that are always the same, its lines printed as they come. Run
 * on this computer and on an 8-bit microcontroller (or a simulation of one), the two texts must not differ: int has 16 bits
 * there, and a shift or a product that needed more would show.
 */
#include "../turnline.h"

#ifdef __AVR__
#include <avr/interrupt.h>
#include <avr/io.h>
#include <avr/sleep.h>

static void print_char(char c)
{
	while (!(UCSR0A & (1 << UDRE0))) {
	}
	UDR0 = (uint8_t)c;
}

static void start(void)
{
	UCSR0B = 1 << TXEN0;
}

/* Asleep without interrupts: nothing wakes it any more, and a simulation ends. */
static void end(void)
{
	cli();
	sleep_enable();
	sleep_cpu();
}
#else
#include <stdio.h>

static void print_char(char c)
{
	putchar(c);
}

static void start(void)
{
}

static void end(void)
{
}
#endif

#define ROUNDS 700

static struct turnline winder;
static struct turnline_retained kept;
static struct turnline_config config = {"replay", "1.0.0", 1, 1200, 100, 1, TURNLINE_STOP_COMMAND, 0};
static uint32_t seed = 1;
static uint32_t now_us = 1000000;
static uint32_t id = UINT32_C(4294967200);
static char text[lineBytesMax];
static uint8_t length;

static uint32_t chance(uint32_t below)
{
	seed = seed * UINT32_C(1664525) + UINT32_C(1013904223);
	return (seed >> 8) % below;
}

static void round_now(void)
{
	char line[lineBytesMax];
	size_t bytes;
	turnline_poll(&winder, now_us / 1000);
	while ((bytes = turnline_next(&winder, line)) > 0) {
		size_t at;
		for (at = 0; at < bytes; at++)
			print_char(line[at]);
	}
	turnline_retain(&winder, &kept);
}

static void wait_us(uint32_t us)
{
	while (us > 10000) {
		now_us += 10000;
		us -= 10000;
		round_now();
	}
	now_us += us;
	round_now();
}

static void turn(int forward, uint32_t period_us)
{
	static const uint8_t order[] = {TURNLINE_A, TURNLINE_A | TURNLINE_B, TURNLINE_B, 0};
	static const uint8_t back[] = {TURNLINE_B, TURNLINE_A | TURNLINE_B, TURNLINE_A, 0};
	uint8_t at;
	for (at = 0; at < 4; at++) {
		now_us += period_us / 4;
		turnline_edge(&winder, forward ? order[at] : back[at], now_us);
		round_now();
	}
}

static void add(const char *more)
{
	while (*more)
		text[length++] = *more++;
}

static void add_number(uint32_t value)
{
	char digits[11];
	uint8_t at = 10;
	digits[at] = '\0';
	do {
		digits[--at] = (char)('0' + (char)(value % 10));
		value /= 10;
	} while (value > 0);
	add(digits + at);
}

static void add_signed(int32_t value)
{
	if (value < 0)
		add("-");
	add_number(value < 0 ? 0u - (uint32_t)value : (uint32_t)value);
}

static void add_boot(void)
{
	uint8_t at;
	add(" b=");
	for (at = 0; at < 8; at++)
		text[length++] = "0123456789ABCDEF"[(winder.boot >> (28 - 4 * at)) & 0xF];
}

static void say(void)
{
	uint16_t crc = turnline_body_crc(text, length);
	uint8_t at;
	for (at = 0; at < length; at++)
		turnline_receive(&winder, (uint8_t)text[at]);
	turnline_receive(&winder, ' ');
	turnline_receive(&winder, '~');
	for (at = 0; at < 4; at++)
		turnline_receive(&winder, (uint8_t)"0123456789ABCDEF"[(crc >> (12 - 4 * at)) & 0xF]);
	turnline_receive(&winder, '\n');
	length = 0;
}

static void say_plan(void)
{
	int32_t net = (int32_t)turnline_forward(&winder) - (int32_t)turnline_reverse(&winder);
	int32_t way = chance(3) == 0 ? -1 : 1;
	int32_t far = chance(8) == 0 ? 70000 : 1;
	add("SET id=");
	add_number(chance(6) == 0 ? id - (chance(2) == 0 ? 3 : 20) : id++);
	add_boot();
	add(" tgt=");
	add_signed(net + way * (int32_t)(1 + chance(40)) * far);
	add(" look=");
	add_number(chance(25));
	add(" ease=");
	add_number(chance(20));
	add(" stop=");
	add_number(chance(5));
	add(" from=");
	add_signed(net - way * (int32_t)(1 + chance(30)) * far);
	say();
}

static void say_ack(void)
{
	uint32_t behind = chance(4);
	add("ACK");
	add_boot();
	add(" n=");
	add_number(winder.line_number > behind ? winder.line_number - behind : 0);
	add(" e=");
	add_number(winder.event_number > behind ? winder.event_number - behind : 0);
	say();
}

static void say_sync(void)
{
	add("SYNC");
	add_boot();
	add(" e=");
	add_number(winder.event_number > 3 ? winder.event_number - 3 : 0);
	say();
}

static void begin(uint32_t boot)
{
	turnline_begin(&winder, &config, boot, 0, &kept);
	turnline_poll(&winder, now_us / 1000);
	turnline_link(&winder, 1);
}

static void do_something(void)
{
	uint32_t turns = chance(12);
	uint32_t period_us = 50000 + chance(400000);
	switch (chance(12)) {
	case 0:
		say_plan();
		break;
	case 1:
	case 2:
		say_ack();
		break;
	case 3:
		say_sync();
		break;
	case 4:
		turnline_link(&winder, 0);
		break;
	case 5:
		turnline_link(&winder, 1);
		break;
	case 6:
		wait_us(chance(4000000));
		break;
	case 7:
		if (chance(6) == 0)
			begin(seed);
		else
			turnline_button(&winder);
		break;
	case 8:
		while (turns-- > 0)
			turn(0, period_us);
		break;
	default:
		while (turns-- > 0)
			turn(1, period_us);
		break;
	}
	round_now();
}

int main(void)
{
	uint16_t round;
	start();
	begin(UINT32_C(0x5C0E91A7));
	for (round = 0; round < ROUNDS; round++)
		do_something();
	end();
	return 0;
}
