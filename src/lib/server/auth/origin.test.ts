import { describe, expect, it } from 'vitest';
import { mayWrite } from './origin.ts';

const at = 'workshop.lan:4173';
const cookie = 'turnstead.session=x';

describe('a write', () => {
	it.each<[string, Record<string, string>, boolean]>([
		['from the same page', { cookie, origin: 'http://workshop.lan:4173', 'sec-fetch-site': 'same-origin' }, true],
		['from a tablet without Sec-Fetch-Site (plain http)', { cookie, origin: 'http://workshop.lan:4173' }, true],
		['behind a proxy that ends TLS', { cookie, origin: 'https://workshop.lan:4173' }, true],
		['of a browser that sends only Sec-Fetch-Site', { cookie, 'sec-fetch-site': 'same-origin' }, true],
		['reloaded by the person', { cookie, 'sec-fetch-site': 'none' }, true],
		['of a program without cookies', {}, true],
		['of a winder with its key', { authorization: 'Bearer key' }, true],
		['of a winder page elsewhere with its key', { authorization: 'Bearer key', origin: 'http://else.where' }, true],
		['with a key and a cookie from elsewhere', { authorization: 'Bearer key', cookie, origin: 'http://a.b' }, false],
		['from another site', { cookie, origin: 'https://else.where', 'sec-fetch-site': 'cross-site' }, false],
		[
			'from another port of the machine',
			{ cookie, origin: 'http://workshop.lan:81', 'sec-fetch-site': 'same-site' },
			false
		],
		['from another name, no Sec-Fetch-Site', { cookie, origin: 'http://workshop.lan.else.where' }, false],
		['from an opaque origin', { cookie, origin: 'null' }, false],
		['from elsewhere without a cookie (signing somebody in)', { origin: 'https://else.where' }, false],
		['with a cookie and no word of where from', { cookie }, false],
		[
			'claiming same-origin with a foreign Origin',
			{ cookie, origin: 'http://a.b', 'sec-fetch-site': 'same-origin' },
			false
		]
	])('%s', (_, headers, allowed) => {
		expect(mayWrite(new Request(`http://${at}/x`, { method: 'POST', headers }), at)).toBe(allowed);
	});
	it('reading is always allowed', () => {
		const headers = { cookie, origin: 'https://else.where', 'sec-fetch-site': 'cross-site' };
		expect(mayWrite(new Request(`http://${at}/x`, { headers }), at)).toBe(true);
	});
});
