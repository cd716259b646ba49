/**
 * What the product is measured against: lines come in by WebSocket or POST and go out as server-sent events, and
 * nothing else is done with them. Prints the port it listens on.
 */
import { createServer } from 'node:http';
import { WebSocketServer } from 'ws';

/** @type {Map<string, Set<import('node:http').ServerResponse>>} */
const screens = new Map();

/** @param {string | undefined} winder @param {string} line */
function pass(winder, line) {
	for (const screen of screens.get(winder ?? '') ?? []) screen.write(`event: live\ndata: ${line}\n\n`);
}

const server = createServer((req, res) => {
	if (req.method === 'POST') {
		let line = '';
		req.on('data', (chunk) => (line += chunk));
		req.on('end', () => {
			pass(req.url, line);
			res.end('{}');
		});
		return;
	}
	const watching = screens.get(req.url ?? '') ?? new Set();
	screens.set(req.url ?? '', watching.add(res));
	res.on('close', () => watching.delete(res));
	res.writeHead(200, { 'content-type': 'text/event-stream' });
	res.write('event: beat\ndata: {}\n\n');
});

new WebSocketServer({ server, perMessageDeflate: false }).on('connection', (link, req) => {
	link.on('message', (data) => pass(req.url, data.toString()));
});

server.listen(0, '127.0.0.1', () => {
	const address = server.address();
	console.log(`port ${typeof address === 'object' ? address?.port : address}`);
});
