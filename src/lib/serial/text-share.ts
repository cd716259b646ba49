/** Whether what comes over a wire is text at all: at a wrong speed it is not. */

/** So many bytes without one good line, and this share of them no text, is no single disturbance. */
const bytesMin = 256;
const oddShareMin = 0.15;
/** Older bytes count half, so that a port that was right for a day is judged by now. */
const bytesMax = 4_096;

export class TextShare {
	#bytes = 0;
	#odd = 0;

	/** Takes bytes as they came. */
	push(chunk: Uint8Array): void {
		for (const byte of chunk) if (!isText(byte)) this.#odd += 1;
		this.#bytes += chunk.length;
		if (this.#bytes > bytesMax) {
			this.#bytes /= 2;
			this.#odd /= 2;
		}
	}

	/** A line with a right checksum came: the speed is right. */
	goodLine(): void {
		this.#bytes = 0;
		this.#odd = 0;
	}

	get unreadable(): boolean {
		return this.#bytes >= bytesMin && this.#odd > this.#bytes * oddShareMin;
	}
}

function isText(byte: number): boolean {
	return (byte >= 0x20 && byte <= 0x7e) || byte === 0x0a || byte === 0x0d;
}
