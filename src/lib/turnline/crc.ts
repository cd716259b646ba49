/**
 * The three 16-bit checksums with polynomial 1021 hex that a sender is likely to have at hand. Turnline uses the first; the
 * others are computed only to name the mistake. Parameters and check values: the public CRC catalogue.
 */

const forwardTable = new Uint16Array(256);
const reflectedTable = new Uint16Array(256);
for (let byte = 0; byte < 256; byte++) {
	let forward = byte << 8;
	let reflected = byte;
	for (let bit = 0; bit < 8; bit++) {
		forward = forward & 0x8000 ? (forward << 1) ^ 0x1021 : forward << 1;
		// 8408 is 1021 with its 16 bits in reverse order.
		reflected = reflected & 1 ? (reflected >>> 1) ^ 0x8408 : reflected >>> 1;
	}
	forwardTable[byte] = forward;
	reflectedTable[byte] = reflected;
}

function forwardCrc(text: string, init: number): number {
	let crc = init;
	for (let i = 0; i < text.length; i++)
		crc = ((crc << 8) & 0xffff) ^ forwardTable[((crc >>> 8) ^ text.charCodeAt(i)) & 0xff]!;
	return crc;
}

/** CRC-16/IBM-3740: poly 1021, init FFFF, no reflection, xorout 0000. `body` is ASCII; the answer is 0 to 65535. */
export function crc16Ibm3740(body: string): number {
	return forwardCrc(body, 0xffff);
}

/** CRC-16/XMODEM: poly 1021, init 0000, no reflection, xorout 0000. */
export function crc16Xmodem(body: string): number {
	return forwardCrc(body, 0);
}

/** CRC-16/KERMIT: poly 1021, init 0000, reflected in and out, xorout 0000. */
export function crc16Kermit(body: string): number {
	let crc = 0;
	for (let i = 0; i < body.length; i++) crc = (crc >>> 8) ^ reflectedTable[(crc ^ body.charCodeAt(i)) & 0xff]!;
	return crc;
}

/** A checksum as a line carries it: 4 hex digits, upper case. */
export function crcText(crc: number): string {
	return crc.toString(16).toUpperCase().padStart(4, '0');
}
