/*
 * A winder that is only a program: the core of this folder with time and sensor edges told from outside. It is what the
 * conformance run and the simulator speak to.
 *
 *	winder [options]                 the line on standard input and output, control on file descriptor 3
 *	winder --script [options]        control on standard input; the winder's lines on standard output
 *	winder --real [options]          as the first, with the clock of this computer; control may be missing
 *
 * Control is text, one order a line, in the order of time:
 *
 *	<us> levels <0-3>     the sensors' outputs from now on: 1 is A, 2 is B, 3 both
 *	<us> time             time goes on
 *	<us> button           the maker presses the button
 *	<us> link up|down     a carrier's link; without a word of it the link is up from the start
 *	<us> say <text>       the host's text with an LF arrives
 *	<us> bye              the winder says its last line
 *	<us> reset            the microcontroller restarts; memory that survives stays
 *	<us> power            it restarts, and that memory is lost too
 *	<us> mark <word>      answered when all before it was done and sent, see below
 *
 * <us> is microseconds since the program started, from 0, never falling. Up to it time goes on in steps of --step, and
 * lines are sent as they come, as from a board's main loop. With --real the clock of this computer counts, and <us> is
 * "-"; a winder without a hand to turn it is turned by --turn. The end of control (with --real: of standard input) ends
 * the program with 0; an order that is none ends it with 2 and a sentence on standard error.
 *
 * Reports go to file descriptor 4 when it is open, and with --script to standard output as comments ("# …"):
 *
 *	cue none|look|ease|stop|over          when it changes
 *	stop 0|1                              when the stop output changes
 *	mark <word> b=<boot> f=<turns> v=<turns> kept=<lines>
 *
 * Options:
 *
 *	--name <word>  --firmware <word>  --ppr <n>  --rpm-max <n>  --rep <ms>  --one-sensor
 *	--stop-output command|mark|both   --watchdog <ms>
 *	--boot <8 hex>        the first boot; the following ones are made from it. Without it: from the clock
 *	--retain              memory survives a reset
 *	--clock-us <us>       what the microcontroller's clocks say when a boot begins (they wrap like a board's)
 *	--step <ms>           1 to 20, 5 without it
 *	--unlinked            the link is down until "link up"
 *	--turn <rpm>:<turning ms>:<standing ms>   with --real: the spindle turns and stands by itself, over and over
 */
#define _POSIX_C_SOURCE 200809L
#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "../turnline.h"

#define ORDER_BYTES_MAX 512

struct turn {
	unsigned long rpm;
	unsigned long turning_ms;
	unsigned long standing_ms;
};

static struct turnline winder;
static struct turnline_retained kept;
static struct turnline_config config = {"winder", "1.0.0", 1, 1200, 100, 1, 0, 0};
static uint32_t boot;
static int script, real, retain, unlinked;
static uint64_t step_us = 5000;
static uint64_t clock_us;
static struct turn turn;

static uint64_t now_us;
static uint64_t born_us;
static uint8_t levels;
static enum turnline_cue cue_said;
static int stop_said;
static int report_fd = -1;

static void fail(const char *why, const char *what)
{
	fprintf(stderr, "winder: %s: %s\n", why, what);
	exit(2);
}

/* Writes all of it; a reader that went away ends the program. */
static void send_bytes(int fd, const char *bytes, size_t length)
{
	while (length > 0) {
		ssize_t written = write(fd, bytes, length);
		if (written < 0) {
			if (errno == EINTR)
				continue;
			exit(0);
		}
		bytes += written;
		length -= (size_t)written;
	}
}

static void report(const char *text)
{
	if (report_fd < 0)
		return;
	if (script)
		send_bytes(report_fd, "# ", 2);
	send_bytes(report_fd, text, strlen(text));
	send_bytes(report_fd, "\n", 1);
}

static uint64_t board_us(void)
{
	return clock_us + now_us - born_us;
}

static void report_changes(void)
{
	static const char *const cues[] = {"cue none", "cue look", "cue ease", "cue stop", "cue over"};
	enum turnline_cue cue = turnline_cue_now(&winder);
	int stop = turnline_stop_wanted(&winder);
	if (cue != cue_said)
		report(cues[cue]);
	if (stop != stop_said)
		report(stop ? "stop 1" : "stop 0");
	cue_said = cue;
	stop_said = stop;
}

/* One round of a board's main loop. */
static void round_now(void)
{
	char line[lineBytesMax];
	size_t length;
	turnline_poll(&winder, (uint32_t)(board_us() / 1000));
	while ((length = turnline_next(&winder, line)) > 0)
		send_bytes(STDOUT_FILENO, line, length);
	if (retain)
		turnline_retain(&winder, &kept);
	report_changes();
}

static void pass_until(uint64_t until_us)
{
	while (until_us - now_us > step_us) {
		now_us += step_us;
		round_now();
	}
	now_us = until_us;
	round_now();
}

static void begin(void)
{
	born_us = now_us;
	turnline_begin(&winder, &config, boot, levels, retain ? &kept : NULL);
	/* Any number that was not there before does for the next boot. */
	boot = boot * UINT32_C(1664525) + UINT32_C(1013904223);
	turnline_poll(&winder, (uint32_t)(board_us() / 1000));
	turnline_link(&winder, !unlinked);
}

static void edge(uint8_t new_levels)
{
	levels = new_levels;
	turnline_edge(&winder, levels, (uint32_t)board_us());
}

static void hear(const char *text, size_t length)
{
	size_t at;
	for (at = 0; at < length; at++)
		turnline_receive(&winder, (uint8_t)text[at]);
}

static void mark(const char *word)
{
	char text[ORDER_BYTES_MAX + 80];
	snprintf(text, sizeof text, "mark %s b=%08lX f=%lu v=%lu kept=%u", word, (unsigned long)winder.boot,
	         (unsigned long)turnline_forward(&winder), (unsigned long)turnline_reverse(&winder), (unsigned)winder.kept);
	report(text);
}

static void order(char *text)
{
	char *what = strchr(text, ' ');
	char *more;
	if (what == NULL)
		fail("not an order", text);
	*what++ = '\0';
	if (!real) {
		char *end;
		uint64_t at = strtoull(text, &end, 10);
		if (*end != '\0' || end == text || at < now_us)
			fail("not a time from now on", text);
		pass_until(at);
	}
	more = strchr(what, ' ');
	if (more != NULL)
		*more++ = '\0';
	if (strcmp(what, "time") == 0 && more == NULL)
		return;
	if (strcmp(what, "levels") == 0 && more != NULL && more[0] >= '0' && more[0] <= '3' && more[1] == '\0') {
		edge((uint8_t)(more[0] - '0'));
		return;
	}
	if (strcmp(what, "mark") == 0 && more != NULL) {
		round_now();
		mark(more);
		return;
	}
	if (strcmp(what, "say") == 0 && more != NULL) {
		hear(more, strlen(more));
		hear("\n", 1);
	} else if (strcmp(what, "button") == 0) {
		turnline_button(&winder);
	} else if (strcmp(what, "link") == 0 && more != NULL) {
		turnline_link(&winder, strcmp(more, "up") == 0);
	} else if (strcmp(what, "bye") == 0) {
		char line[lineBytesMax];
		send_bytes(STDOUT_FILENO, line, turnline_bye(&winder, line));
	} else if (strcmp(what, "reset") == 0) {
		begin();
	} else if (strcmp(what, "power") == 0) {
		memset(&kept, 0, sizeof kept);
		begin();
	} else {
		fail("not an order", what);
	}
	round_now();
}

/* Reads what is there and gives out whole orders. Returns 0 at the end. */
static int read_orders(int fd)
{
	static char held[ORDER_BYTES_MAX];
	static size_t length;
	char bytes[4096];
	ssize_t got = read(fd, bytes, sizeof bytes);
	ssize_t at;
	if (got <= 0)
		return got < 0 && errno == EINTR;
	for (at = 0; at < got; at++) {
		if (bytes[at] == '\n') {
			held[length] = '\0';
			length = 0;
			if (held[0] != '\0' && held[0] != '#')
				order(held);
		} else if (length + 1 >= sizeof held) {
			fail("an order is too long", "512 bytes at most");
		} else {
			held[length++] = bytes[at];
		}
	}
	return 1;
}

static int read_line_bytes(void)
{
	char bytes[4096];
	ssize_t got = read(STDIN_FILENO, bytes, sizeof bytes);
	if (got <= 0)
		return got < 0 && errno == EINTR;
	hear(bytes, (size_t)got);
	round_now();
	return 1;
}

static uint64_t real_us(void)
{
	struct timespec now;
	clock_gettime(CLOCK_MONOTONIC, &now);
	return (uint64_t)now.tv_sec * 1000000u + (uint64_t)now.tv_nsec / 1000u;
}

/* The spindle that turns by itself: its levels at a time, four equal quarters of a magnet passed forward. */
static uint8_t turned_levels(uint64_t us)
{
	static const uint8_t quarters[] = {0, TURNLINE_A, TURNLINE_A | TURNLINE_B, TURNLINE_B};
	uint64_t cycle_us = (turn.turning_ms + turn.standing_ms) * UINT64_C(1000);
	uint64_t into_us = us % cycle_us;
	uint64_t turning_us = us / cycle_us * turn.turning_ms * 1000 + (into_us < turn.turning_ms * UINT64_C(1000) ? into_us : turn.turning_ms * UINT64_C(1000));
	uint64_t quarter = turning_us * turn.rpm * config.pulses_per_turn * 4 / 60000000u;
	return quarters[quarter % 4];
}

static void turn_until(uint64_t until_us)
{
	while (now_us < until_us) {
		uint8_t next = turned_levels(now_us);
		if (next != levels)
			edge(next);
		/* Finer than the shortest quarter, so that none is left out. */
		now_us += until_us - now_us < 100 ? until_us - now_us : 100;
	}
}

static void run_real(int control_fd)
{
	uint64_t started_us = real_us();
	for (;;) {
		struct pollfd fds[2];
		fds[0].fd = STDIN_FILENO;
		fds[1].fd = control_fd;
		fds[0].events = fds[1].events = POLLIN;
		fds[0].revents = fds[1].revents = 0;
		poll(fds, 2, (int)(step_us / 1000));
		if (turn.rpm > 0)
			turn_until(real_us() - started_us);
		else
			now_us = real_us() - started_us;
		if (fds[0].revents && !read_line_bytes())
			return;
		if (fds[1].revents && !read_orders(control_fd))
			control_fd = -1;
		round_now();
	}
}

static void run_told(int control_fd)
{
	int line_fd = script ? -1 : STDIN_FILENO;
	round_now();
	for (;;) {
		struct pollfd fds[2];
		fds[0].fd = line_fd;
		fds[1].fd = control_fd;
		fds[0].events = fds[1].events = POLLIN;
		fds[0].revents = fds[1].revents = 0;
		if (poll(fds, 2, -1) < 0 && errno != EINTR)
			return;
		if (fds[0].revents && !read_line_bytes())
			line_fd = -1;
		if (fds[1].revents && !read_orders(control_fd))
			return;
	}
}

static unsigned long number(const char *text, unsigned long least, unsigned long most)
{
	char *end;
	unsigned long value = strtoul(text, &end, 10);
	if (*end != '\0' || end == text || value < least || value > most)
		fail("not a number in its range", text);
	return value;
}

static uint8_t stop_output(const char *text)
{
	if (strcmp(text, "command") == 0)
		return TURNLINE_STOP_COMMAND;
	if (strcmp(text, "mark") == 0)
		return TURNLINE_STOP_MARK;
	if (strcmp(text, "both") != 0)
		fail("command, mark or both", text);
	return TURNLINE_STOP_COMMAND | TURNLINE_STOP_MARK;
}

static int is_option(const char *name, const char *wanted)
{
	return strcmp(name, wanted) == 0;
}

static int flag(const char *name)
{
	if (is_option(name, "--script"))
		script = 1;
	else if (is_option(name, "--real"))
		real = 1;
	else if (is_option(name, "--retain"))
		retain = 1;
	else if (is_option(name, "--unlinked"))
		unlinked = 1;
	else if (is_option(name, "--one-sensor"))
		config.sees_direction = 0;
	else
		return 0;
	return 1;
}

static void option(const char *name, const char *value)
{
	if (value == NULL)
		fail("no such option, or without its value", name);
	if (is_option(name, "--name"))
		config.name = value;
	else if (is_option(name, "--firmware"))
		config.firmware = value;
	else if (is_option(name, "--ppr"))
		config.pulses_per_turn = (uint16_t)number(value, 1, 65535);
	else if (is_option(name, "--rpm-max"))
		config.rpm_max = (uint16_t)number(value, 60, 65535);
	else if (is_option(name, "--rep"))
		config.report_ms = (uint16_t)number(value, 10, tickMsMax);
	else if (is_option(name, "--watchdog"))
		config.watchdog_ms = (uint16_t)number(value, 1000, 60000);
	else if (is_option(name, "--stop-output"))
		config.stop_output = stop_output(value);
	else if (is_option(name, "--boot"))
		boot = (uint32_t)strtoul(value, NULL, 16);
	else if (is_option(name, "--clock-us"))
		clock_us = strtoull(value, NULL, 10);
	else if (is_option(name, "--step"))
		step_us = number(value, 1, 20) * 1000;
	else if (!is_option(name, "--turn") ||
	         sscanf(value, "%lu:%lu:%lu", &turn.rpm, &turn.turning_ms, &turn.standing_ms) != 3 || turn.rpm > 65535 ||
	         turn.turning_ms + turn.standing_ms == 0)
		fail("no such option, or not its value", name);
}

static int is_open(int fd)
{
	return fcntl(fd, F_GETFD) != -1;
}

int main(int argc, char **argv)
{
	int at;
	int control_fd;
	boot = (uint32_t)real_us();
	for (at = 1; at < argc; at++) {
		if (!flag(argv[at])) {
			option(argv[at], at + 1 < argc ? argv[at + 1] : NULL);
			at++;
		}
	}
	control_fd = script ? STDIN_FILENO : is_open(3) ? 3 : -1;
	report_fd = script ? STDOUT_FILENO : is_open(4) ? 4 : -1;
	if (!real && control_fd < 0)
		fail("control is missing", "open file descriptor 3, or say --script or --real");
	begin();
	if (real)
		run_real(control_fd);
	else
		run_told(control_fd);
	return 0;
}
