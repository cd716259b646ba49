/*
 * Lines of the host: text to command. The checks come in the order of the TypeScript codec, so that both give the same
 * reason. Nothing is copied: keys are looked for in the text.
 */
#include "internal.h"

struct span {
	const char *at;
	size_t length;
};

static int is_visible(char c)
{
	return c >= ' ' && c <= '~';
}

static int is_capital(char c)
{
	return c >= 'A' && c <= 'Z';
}

static int is_small(char c)
{
	return c >= 'a' && c <= 'z';
}

static int is_digit(char c)
{
	return c >= '0' && c <= '9';
}

/* A hex digit in upper case, or -1. */
static int hex_value(char c)
{
	if (is_digit(c))
		return c - '0';
	return c >= 'A' && c <= 'F' ? c - 'A' + 10 : -1;
}

/* Up to four letters as LETTERS gives them; 0 where there are none or more. */
static uint32_t letters_of(const char *at, size_t length)
{
	uint32_t letters = 0;
	size_t i;
	if (length > 4)
		return 0;
	for (i = 0; i < 4; i++)
		letters = (letters << 8) | (i < length ? (uint32_t)(unsigned char)at[i] : 0u);
	return letters;
}

/* The part from `from` to the next space or the end. */
static struct span part_at(struct span body, size_t from)
{
	struct span part;
	part.at = body.at + from;
	part.length = 0;
	while (from + part.length < body.length && part.at[part.length] != ' ')
		part.length++;
	return part;
}

static size_t key_length(struct span pair)
{
	size_t length = 0;
	while (length < pair.length && pair.at[length] != '=')
		length++;
	return length;
}

/* The value of the first pair of that key before `end`; at NULL where there is none. */
static struct span value_of(struct span body, uint32_t key, size_t end)
{
	struct span pair = part_at(body, 0);
	size_t from = pair.length + 1;
	while (from < end) {
		size_t length;
		pair = part_at(body, from);
		length = key_length(pair);
		if (letters_of(pair.at, length) == key) {
			pair.at += length + 1;
			pair.length -= length + 1;
			return pair;
		}
		from += pair.length + 1;
	}
	pair.at = NULL;
	pair.length = 0;
	return pair;
}

static enum refusal check_pair(struct span body, size_t from, struct span pair, uint32_t *key)
{
	size_t length = key_length(pair);
	size_t i;
	*key = 0;
	if (length == 0 || length == pair.length || length > keyCharsMax)
		return REFUSED_FORM;
	for (i = 0; i < length; i++) {
		if (!is_small(pair.at[i]))
			return REFUSED_FORM;
	}
	*key = letters_of(pair.at, length);
	if (pair.length - length - 1 < 1 || pair.length - length - 1 > valueCharsMax)
		return REFUSED_FORM;
	for (i = length + 1; i < pair.length; i++) {
		if (pair.at[i] == '~')
			return REFUSED_FORM;
	}
	return value_of(body, *key, from).at == NULL ? READ_OK : REFUSED_DUPLICATE_KEY;
}

/* verb *( SP key "=" value ), exactly one space between, no key twice. */
static enum refusal check_body(struct span body, struct span *verb, uint32_t *key)
{
	size_t from;
	size_t i;
	*verb = part_at(body, 0);
	if (verb->length < 1 || verb->length > verbCharsMax)
		return REFUSED_FORM;
	for (i = 0; i < verb->length; i++) {
		if (!is_capital(verb->at[i]) && !(verb->length == 1 && verb->at[0] == '?'))
			return REFUSED_FORM;
	}
	for (from = verb->length + 1; from <= body.length;) {
		struct span pair = part_at(body, from);
		enum refusal why = check_pair(body, from, pair, key);
		if (why != READ_OK)
			return why;
		from += pair.length + 1;
	}
	*key = 0;
	return READ_OK;
}

/* One number has one spelling: no plus, no leading zero, no minus zero. Returns 0 when it is none, or above 2^32 − 1. */
static int read_digits(struct span text, uint32_t *value)
{
	size_t i;
	*value = 0;
	if (text.length < 1 || text.length > 10 || (text.at[0] == '0' && text.length > 1))
		return 0;
	for (i = 0; i < text.length; i++) {
		uint32_t digit;
		if (!is_digit(text.at[i]))
			return 0;
		digit = (uint32_t)(text.at[i] - '0');
		if (*value > UINT32_C(429496729) || (*value == UINT32_C(429496729) && digit > 5))
			return 0;
		*value = *value * 10 + digit;
	}
	return 1;
}

/* What a verb wants of its keys, asked for one by one: the first that is not as it should be is the reason. */
struct asking {
	struct span body;
	enum refusal why;
	uint32_t key;
};

static struct span ask(struct asking *asking, uint32_t key, int required)
{
	struct span value = {NULL, 0};
	if (asking->why != READ_OK)
		return value;
	asking->key = key;
	value = value_of(asking->body, key, asking->body.length + 1);
	if (value.at == NULL && required)
		asking->why = REFUSED_MISSING_KEY;
	return value;
}

static uint8_t ask_u32(struct asking *asking, uint32_t key, int required, uint32_t *value)
{
	struct span text = ask(asking, key, required);
	if (text.at == NULL)
		return 0;
	if (!read_digits(text, value)) {
		asking->why = REFUSED_RANGE;
		return 0;
	}
	return 1;
}

static void ask_i32(struct asking *asking, uint32_t key, int required, int32_t *value)
{
	struct span text = ask(asking, key, required);
	uint32_t digits;
	int negative;
	if (text.at == NULL)
		return;
	negative = text.at[0] == '-';
	if (negative) {
		text.at++;
		text.length--;
	}
	if (!read_digits(text, &digits) || digits > UINT32_C(0x7FFFFFFF) + (negative ? 1u : 0u) || (negative && digits == 0))
		asking->why = REFUSED_RANGE;
	else
		*value = signed_of(negative ? 0u - digits : digits);
}

static uint8_t ask_boot(struct asking *asking, int required, uint32_t *boot)
{
	struct span text = ask(asking, LETTERS('b', 0, 0, 0), required);
	size_t i;
	if (text.at == NULL)
		return 0;
	*boot = 0;
	for (i = 0; i < text.length; i++) {
		int digit = hex_value(text.at[i]);
		if (digit < 0 || text.length != 8) {
			asking->why = REFUSED_RANGE;
			return 0;
		}
		*boot = (*boot << 4) | (uint32_t)digit;
	}
	return 1;
}

static enum verb host_verb(uint32_t letters)
{
	if (letters == LETTERS('?', 0, 0, 0))
		return VERB_ASK;
	if (letters == LETTERS('S', 'E', 'T', 0))
		return VERB_SET;
	if (letters == LETTERS('S', 'T', 'O', 'P'))
		return VERB_STOP;
	if (letters == LETTERS('A', 'C', 'K', 0))
		return VERB_ACK;
	if (letters == LETTERS('S', 'Y', 'N', 'C'))
		return VERB_SYNC;
	if (letters == LETTERS('H', 'O', 'L', 'D'))
		return VERB_HOLD;
	if (letters == LETTERS('T', 'I', 'M', 'E'))
		return VERB_TIME;
	return VERB_NONE;
}

static void ask_set(struct asking *asking, struct command *command)
{
	command->has_id = ask_u32(asking, LETTERS('i', 'd', 0, 0), 1, &command->id);
	command->has_boot = ask_boot(asking, 1, &command->boot);
	ask_i32(asking, LETTERS('t', 'g', 't', 0), 1, &command->target);
	ask_u32(asking, LETTERS('l', 'o', 'o', 'k'), 1, &command->look);
	ask_u32(asking, LETTERS('e', 'a', 's', 'e'), 1, &command->ease);
	ask_u32(asking, LETTERS('s', 't', 'o', 'p'), 1, &command->stop);
	ask_i32(asking, LETTERS('f', 'r', 'o', 'm'), 0, &command->from);
	ask_u32(asking, LETTERS('f', 's', 't', 0), 0, &command->first);
	if (asking->why == READ_OK && command->target == command->from) {
		asking->why = REFUSED_RANGE;
		asking->key = LETTERS('t', 'g', 't', 0);
	}
}

static void ask_all(struct asking *asking, struct command *command)
{
	switch (command->verb) {
	case VERB_SET:
		ask_set(asking, command);
		return;
	case VERB_STOP:
		command->has_id = ask_u32(asking, LETTERS('i', 'd', 0, 0), 0, &command->id);
		command->has_boot = ask_boot(asking, 0, &command->boot);
		return;
	case VERB_ACK:
		command->has_boot = ask_boot(asking, 1, &command->boot);
		ask_u32(asking, LETTERS('n', 0, 0, 0), 1, &command->n);
		ask_u32(asking, LETTERS('e', 0, 0, 0), 1, &command->e);
		return;
	case VERB_SYNC:
		command->has_boot = ask_boot(asking, 1, &command->boot);
		ask_u32(asking, LETTERS('e', 0, 0, 0), 1, &command->e);
		return;
	case VERB_HOLD:
		ask_u32(asking, LETTERS('m', 's', 0, 0), 1, &command->amount);
		if (asking->why == READ_OK && command->amount > holdMsMax)
			asking->why = REFUSED_RANGE;
		return;
	case VERB_TIME:
		ask_u32(asking, LETTERS('u', 0, 0, 0), 1, &command->amount);
		return;
	default:
		return;
	}
}

/* Whether the text ends in " ~" and four hex digits, and which number they are. */
static int has_checksum(const char *text, size_t length, uint16_t *given)
{
	size_t i;
	*given = 0;
	if (length < 6 || text[length - 6] != ' ' || text[length - 5] != '~')
		return 0;
	for (i = length - 4; i < length; i++) {
		int digit = hex_value(text[i]);
		if (digit < 0)
			return 0;
		*given = (uint16_t)((uint16_t)(*given << 4) | (uint16_t)digit);
	}
	return 1;
}

static enum refusal check_text(const char *text, size_t *length)
{
	size_t i;
	if (*length > lineBytesMax - 1)
		return REFUSED_TOO_LONG;
	if (*length > 0 && text[*length - 1] == '\r')
		(*length)--;
	for (i = 0; i < *length; i++) {
		if (!is_visible(text[i]))
			return REFUSED_NOT_ASCII;
	}
	return *length == 0 || text[0] == '#' ? READ_NOTHING : READ_OK;
}

enum refusal read_line(const char *text, size_t length, struct command *command, uint32_t *key)
{
	const struct command none = {VERB_NONE, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0};
	struct asking asking;
	struct span verb;
	uint16_t given;
	int summed;
	enum refusal why = check_text(text, &length);
	*command = none;
	*key = 0;
	if (why != READ_OK)
		return why;
	summed = has_checksum(text, length, &given);
	asking.body.at = text;
	asking.body.length = summed ? length - 6 : length;
	if (summed) {
		if (turnline_body_crc(text, asking.body.length) != given)
			return REFUSED_CHECKSUM;
	} else {
		size_t i;
		for (i = 0; i < length; i++) {
			if (text[i] == '~') {
				*key = LETTERS('~', 0, 0, 0);
				return REFUSED_FORM;
			}
		}
	}
	why = check_body(asking.body, &verb, key);
	if (why != READ_OK)
		return why;
	command->verb = host_verb(letters_of(verb.at, verb.length));
	if (!summed && command->verb != VERB_ASK && command->verb != VERB_STOP)
		return REFUSED_NO_CHECKSUM;
	if (command->verb == VERB_NONE)
		return REFUSED_VERB;
	asking.why = READ_OK;
	asking.key = 0;
	ask_all(&asking, command);
	if (asking.why != READ_OK)
		*key = asking.key;
	return asking.why;
}
