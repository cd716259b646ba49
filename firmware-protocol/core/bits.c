/* Numbers to bytes and back, and the checksum, without a table: an 8-bit board would keep a table in its RAM. */
#include "internal.h"

/* What the 32 bits mean in two's complement. A plain cast of a large value is the compiler's own choice in C99. */
int32_t signed_of(uint32_t value)
{
	return value <= UINT32_C(0x7FFFFFFF) ? (int32_t)value : -(int32_t)(UINT32_C(0xFFFFFFFF) - value) - 1;
}

/* Lowest byte first, whatever the processor's own order is. */
uint32_t get_bytes(const unsigned char *from, uint8_t bytes)
{
	uint32_t value = 0;
	while (bytes > 0)
		value = (value << 8) | from[--bytes];
	return value;
}

void put_bytes(unsigned char *to, uint8_t bytes, uint32_t value)
{
	uint8_t at;
	for (at = 0; at < bytes; at++) {
		to[at] = (unsigned char)(value & 0xFFu);
		value >>= 8;
	}
}

/* CRC-16/IBM-3740: polynomial 1021 taken eight steps at a time by shifts, start value FFFF. */
uint16_t crc_over(const unsigned char *bytes, size_t length)
{
	uint16_t crc = 0xFFFFu;
	size_t at;
	for (at = 0; at < length; at++) {
		uint16_t x = (uint16_t)((crc >> 8) ^ bytes[at]);
		x = (uint16_t)(x ^ (x >> 4));
		crc = (uint16_t)((uint16_t)(crc << 8) ^ (uint16_t)(x << 12) ^ (uint16_t)(x << 5) ^ x);
	}
	return crc;
}

uint16_t turnline_body_crc(const char *body, size_t length)
{
	return crc_over((const unsigned char *)body, length);
}
