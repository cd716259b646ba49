/** The limits of Turnline 1, each with its reason. PROTOCOL.md states the same figures and a test compares the two. */

/** The version this code speaks, `p` in `HI`. */
export const protocolVersion = 1;
/** With its LF: a device can keep one line in a fixed buffer; the longest `HI` takes about 130. */
export const lineBytesMax = 160;
/** One line as JSON: the same keys with quotes, colons and commas, and some white space. */
export const jsonLineCharsMax = 512;
export const verbCharsMax = 4;
export const keyCharsMax = 4;
/** Room for a future key with a longer text; every key known today is shorter. */
export const valueCharsMax = 40;
export const wordCharsMax = 16;
export const u32Max = 4_294_967_295;
export const i32Min = -2_147_483_648;
export const i32Max = 2_147_483_647;
export const i16Min = -32_768;
export const i16Max = 32_767;
export const u16Max = 65_535;
/** A winder held for longer would look like one that is gone. */
export const holdMsMax = 60_000;
