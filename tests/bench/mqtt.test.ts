import { createServer, type AddressInfo, type Socket } from 'node:net';
import { expect, it } from 'vitest';
import { encodeLength, encodePacket, MqttClient, packetReader, type Packet } from './mqtt.ts';

// MQTT 3.1.1, table 2.4: the smallest and largest values of one to four bytes.
const tableOfLengths: [number, number[]][] = [
	[0, [0x00]],
	[127, [0x7f]],
	[128, [0x80, 0x01]],
	[16_383, [0xff, 0x7f]],
	[16_384, [0x80, 0x80, 0x01]],
	[2_097_151, [0xff, 0xff, 0x7f]],
	[2_097_152, [0x80, 0x80, 0x80, 0x01]],
	[268_435_455, [0xff, 0xff, 0xff, 0x7f]]
];

it('a length is written as the table of the standard has it', () => {
	for (const [length, bytes] of tableOfLengths) expect([...encodeLength(length)]).toEqual(bytes);
	expect(() => encodeLength(268_435_456)).toThrow(RangeError);
});

it('packets are the same however the bytes are cut', () => {
	const bytes = Buffer.concat([
		encodePacket(3, 2, Buffer.alloc(200, 7)),
		encodePacket(4, 0, Buffer.from([0, 1])),
		encodePacket(13, 0, Buffer.alloc(0))
	]);
	for (const size of [1, 2, 3, 50, bytes.length]) {
		const heard: Packet[] = [];
		const read = packetReader((packet) => heard.push(packet));
		for (let at = 0; at < bytes.length; at += size) read(bytes.subarray(at, at + size));
		expect(heard.map(({ type, flags, body }) => [type, flags, body.length])).toEqual([
			[3, 2, 200],
			[4, 0, 2],
			[13, 0, 0]
		]);
	}
});

it('a length of five bytes is refused', () => {
	const read = packetReader(() => {});
	expect(() => read(Buffer.from([0x30, 0xff, 0xff, 0xff, 0xff, 0x01]))).toThrow('four bytes');
});

it('a client subscribes, publishes at QoS 1 and acknowledges what it hears', async () => {
	// As little of a broker as the exchange needs: what is published comes back to who published it.
	const heard: Packet[] = [];
	const broker = createServer((socket: Socket) => {
		socket.on(
			'data',
			packetReader((packet) => {
				heard.push(packet);
				if (packet.type === 1) socket.write(encodePacket(2, 0, Buffer.from([0, 0])));
				if (packet.type === 8) socket.write(encodePacket(9, 0, Buffer.from([...packet.body.subarray(0, 2), 1])));
				if (packet.type === 3) socket.write(encodePacket(3, packet.flags, packet.body));
				if (packet.type === 14) socket.end();
			})
		);
	});
	await new Promise<void>((resolve) => broker.listen(0, '127.0.0.1', resolve));
	try {
		const client = await MqttClient.open((broker.address() as AddressInfo).port, 'screen-1');
		await client.subscribe('winder/1');
		const came = new Promise<[string, string]>(
			(resolve) => (client.onMessage = (topic, payload) => resolve([topic, payload.toString()]))
		);
		client.publish('winder/1', 'T f=1');
		expect(await came).toEqual(['winder/1', 'T f=1']);
		await client.end();
	} finally {
		broker.close();
	}
	const [connect, subscribe, publish, acknowledgement] = heard;
	// Protocol name and level as in 3.1.2; a clean session of no more than a client's name.
	expect([...(connect?.body.subarray(0, 8) ?? [])]).toEqual([0, 4, 0x4d, 0x51, 0x54, 0x54, 4, 2]);
	expect([subscribe?.type, subscribe?.flags, subscribe?.body.at(-1)]).toEqual([8, 2, 1]);
	expect([publish?.type, publish?.flags]).toEqual([3, 2]);
	const id = publish?.body.subarray(10, 12);
	expect([acknowledgement?.type, acknowledgement?.body]).toEqual([4, id]);
});
