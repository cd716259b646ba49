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

/** Lines a second a winder may send over time: ten ticks with room for events. */
export const linesPerSecondMax = 20;
/** Lines at once above that: a full ring of 256 twice over, as after a broken link. */
export const burstLinesMax = 600;
export const replayLinesPerSecondMax = 200;
/** Cable, Wi-Fi and a bridge at once, and two being replaced. */
export const linksPerWinderMax = 5;
/** A standing winder says so at least this often, else it is taken for gone. */
export const tickMsMax = 1_000;
/** Half a minute of one line a second. */
export const ringLinesMin = 32;
/** Answers a device remembers, so that a command sent again is answered again and not acted on again. */
export const answersKeptMin = 8;
/** A `STOP` older than this is void: it would stop the next coil. */
export const stopVoidMs = 2_000;

/** One HTTP batch. */
export const httpLinesMax = 500;
export const httpBytesMax = 65_536;
/** Longest wait between two HTTP batches while winding. */
export const retryMsMax = 250;
/** One WebSocket message. */
export const messageLinesMax = 50;
export const messageBytesMax = 16_384;
export const pingSeconds = 20;
export const subprotocol = 'turnline.1';
export const serialBaud = 115_200;
