/** Bytes as a carrier brings them to the texts of lines, in bounded memory. */
import { lineBytesMax } from './limits.ts';

const lf = 0x0a;

export interface Splitter {
	/** Takes the next bytes; answers the lines they completed, without LF. A CR before it stays: the parser ignores it. */
	push(chunk: Uint8Array): string[];
	/** Lines dropped so far, each counted once when its fault is met. */
	readonly dropped: { readonly tooLong: number; readonly notAscii: number };
}

/**
 * A splitter for one link. A line with more than 159 bytes before its LF, a NUL, or a byte over 7F is dropped to the next
 * LF and counted. Never holds more than one line.
 */
export function newSplitter(): Splitter {
	const held = new Uint8Array(lineBytesMax - 1);
	let length = 0;
	let dropping = false;
	const dropped = { tooLong: 0, notAscii: 0 };

	const drop = (why: keyof typeof dropped) => {
		dropped[why]++;
		dropping = true;
		length = 0;
	};

	return {
		dropped,
		push(chunk) {
			const texts: string[] = [];
			for (const byte of chunk) {
				if (byte === lf) {
					if (!dropping) texts.push(String.fromCharCode(...held.subarray(0, length)));
					dropping = false;
					length = 0;
				} else if (dropping) continue;
				else if (byte === 0 || byte > 0x7f) drop('notAscii');
				else if (length === held.length) drop('tooLong');
				else held[length++] = byte;
			}
			return texts;
		}
	};
}
