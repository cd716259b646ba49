/** Turnline 1: text to typed line and back. firmware-protocol/PROTOCOL.md is normative. */
export * from './types.ts';
export * from './limits.ts';
export { crc16Ibm3740, crc16Kermit, crc16Xmodem, crcText } from './crc.ts';
export { formatLine, withChecksum } from './format.ts';
export { parseDeviceLine, parseHostLine, parseLine, type Refused } from './parse.ts';
export { parseJsonLine } from './parse-json.ts';
export { refusalText } from './refusal-text.ts';
export { newSplitter, type Splitter } from './split.ts';
