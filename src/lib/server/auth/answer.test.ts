import { describe, expect, it } from 'vitest';
import { asProblem, harden } from './answer.ts';

describe('a refusal of the API', () => {
	it.each([403, 404, 405, 413, 500])('%i in plain text becomes problem+json', async (status) => {
		const answer = asProblem(new Response('no', { status, headers: { 'content-type': 'text/plain' } }));
		expect(answer.status).toBe(status);
		expect(answer.headers.get('content-type')).toBe('application/problem+json');
		expect(await answer.json()).toMatchObject({ type: 'about:blank', status, detail: expect.any(String) });
	});
	it('keeps which methods are allowed and how long to wait', () => {
		const headers = { allow: 'GET, POST', 'retry-after': '7' };
		const answer = asProblem(new Response('no', { status: 405, headers }));
		expect(answer.headers.get('allow')).toBe('GET, POST');
		expect(answer.headers.get('retry-after')).toBe('7');
	});
	it('a redirect to the sign-in page becomes 401', () => {
		const answer = asProblem(new Response(null, { status: 303, headers: { location: '/sign-in' } }));
		expect(answer.status).toBe(401);
		expect(answer.headers.get('www-authenticate')).toMatch(/^Bearer/);
	});
	it('what is a problem already, a success or unmodified stays as it is', () => {
		const own = new Response('{}', { status: 422, headers: { 'content-type': 'application/problem+json' } });
		for (const response of [own, new Response('ok'), new Response(null, { status: 304 })]) {
			expect(asProblem(response)).toBe(response);
		}
	});
});

describe('headers of an answer', () => {
	it('HSTS is sent over https alone', () => {
		const sent = (https: boolean) =>
			harden(new Response(), { https, personal: false }).headers.has('strict-transport-security');
		expect([sent(true), sent(false)]).toEqual([true, false]);
	});
	it('what a route chose stays', () => {
		const response = new Response('', { headers: { 'cache-control': 'no-cache' } });
		expect(harden(response, { https: false, personal: true }).headers.get('cache-control')).toBe('no-cache');
	});
	it('an answer for one person is kept by no cache', () => {
		const answer = harden(new Response(), { https: false, personal: true });
		expect(answer.headers.get('cache-control')).toBe('private, no-store');
	});
});
