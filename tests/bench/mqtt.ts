import { connect, type Socket } from 'node:net';

/**
 * As much of MQTT 3.1.1 (OASIS standard, 29 October 2014) as a measurement beside a broker needs: connect with a clean
 * session, subscribe and publish at QoS 1. The numbers in brackets name clauses of that standard.
 */

const types = { connect: 1, connack: 2, publish: 3, puback: 4, subscribe: 8, suback: 9, disconnect: 14 } as const;
const qos1 = 1;
const keepAliveS = 60;
/** [2.2.3] Four bytes of seven bits. */
const lengthMax = 268_435_455;

export interface Packet {
	type: number;
	/** The low four bits of the first byte. */
	flags: number;
	body: Buffer;
}

/** [2.2.3] Seven bits a byte, the lowest first; the high bit says that more come. */
export function encodeLength(length: number): Buffer {
	if (length < 0 || length > lengthMax) throw new RangeError(`${length} bytes fit no packet`);
	const bytes: number[] = [];
	do {
		const rest = Math.floor(length / 128);
		bytes.push((length % 128) | (rest > 0 ? 128 : 0));
		length = rest;
	} while (length > 0);
	return Buffer.from(bytes);
}

export function encodePacket(type: number, flags: number, body: Buffer): Buffer {
	return Buffer.concat([Buffer.from([(type << 4) | flags]), encodeLength(body.length), body]);
}

/** Gives out whole packets of what comes in pieces. Throws where the length has a fifth byte. */
export function packetReader(hear: (packet: Packet) => void): (chunk: Buffer) => void {
	let rest: Buffer = Buffer.alloc(0);
	return (chunk) => {
		rest = rest.length === 0 ? chunk : Buffer.concat([rest, chunk]);
		for (;;) {
			let length = 0;
			let at = 1;
			for (;;) {
				if (at > 4) throw new Error('a length of more than four bytes');
				const byte = rest[at];
				if (byte === undefined) return;
				length += (byte & 127) * 128 ** (at - 1);
				at += 1;
				if ((byte & 128) === 0) break;
			}
			if (rest.length < at + length) return;
			const first = rest[0] as number;
			const packet = { type: first >> 4, flags: first & 15, body: rest.subarray(at, at + length) };
			rest = rest.subarray(at + length);
			hear(packet);
		}
	};
}

/** [1.5.3] UTF-8 after its length in two bytes. */
function text(value: string): Buffer {
	const bytes = Buffer.from(value, 'utf8');
	return Buffer.concat([u16(bytes.length), bytes]);
}

function u16(value: number): Buffer {
	return Buffer.from([value >> 8, value & 255]);
}

export class MqttClient {
	/** Told of each message; it is acknowledged afterwards. */
	onMessage: (topic: string, payload: Buffer) => void = () => {};
	readonly #socket: Socket;
	readonly #waiting = new Map<number, () => void>();
	#nextId = 0;

	private constructor(socket: Socket) {
		this.#socket = socket;
	}

	/** On loopback, with a clean session. Rejects when the broker refuses or ends the connection. */
	static open(port: number, clientId: string): Promise<MqttClient> {
		return new Promise((resolve, reject) => {
			const socket = connect({ host: '127.0.0.1', port, noDelay: true });
			const client = new MqttClient(socket);
			socket.on('error', reject);
			socket.on('close', () => reject(new Error('the broker ended the connection')));
			socket.on(
				'data',
				packetReader((packet) => {
					if (packet.type !== types.connack) return client.#take(packet);
					// [3.2.2.3] 0: accepted.
					if (packet.body[1] === 0) resolve(client);
					else reject(new Error(`the broker refused with ${packet.body[1]}`));
				})
			);
			// [3.1.2] Protocol name and level 4, clean session.
			const body = Buffer.concat([text('MQTT'), Buffer.from([4, 2]), u16(keepAliveS), text(clientId)]);
			socket.write(encodePacket(types.connect, 0, body));
		});
	}

	/** Resolves once the broker has taken the subscription. */
	subscribe(topic: string): Promise<void> {
		const id = this.#id();
		// [3.8.1] The flags of SUBSCRIBE are 0010.
		const packet = encodePacket(types.subscribe, 2, Buffer.concat([u16(id), text(topic), Buffer.from([qos1])]));
		return new Promise((resolve) => {
			this.#waiting.set(id, resolve);
			this.#socket.write(packet);
		});
	}

	publish(topic: string, payload: string): void {
		const body = Buffer.concat([text(topic), u16(this.#id()), Buffer.from(payload, 'utf8')]);
		this.#socket.write(encodePacket(types.publish, qos1 << 1, body));
	}

	end(): Promise<void> {
		return new Promise((resolve) => {
			this.#socket.once('close', () => resolve());
			this.#socket.end(encodePacket(types.disconnect, 0, Buffer.alloc(0)));
		});
	}

	/** [2.3.1] Any number but 0. Those in flight are far fewer than there are numbers. */
	#id(): number {
		this.#nextId = (this.#nextId % 65_535) + 1;
		return this.#nextId;
	}

	#take({ type, flags, body }: Packet): void {
		if (type === types.publish) {
			const topicEnd = 2 + body.readUInt16BE(0);
			const acknowledged = ((flags >> 1) & 3) === qos1;
			this.onMessage(body.toString('utf8', 2, topicEnd), body.subarray(acknowledged ? topicEnd + 2 : topicEnd));
			if (acknowledged) this.#socket.write(encodePacket(types.puback, 0, body.subarray(topicEnd, topicEnd + 2)));
		} else if (type === types.suback) {
			const id = body.readUInt16BE(0);
			// [3.9.3] 128: refused.
			if (body[2] === 128) throw new Error('the broker refused the subscription');
			this.#waiting.get(id)?.();
			this.#waiting.delete(id);
		}
	}
}
