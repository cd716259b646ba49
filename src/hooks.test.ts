import { expect, it } from 'vitest';
import { reroute } from './hooks.ts';

const routed = (path: string) => reroute({ url: new URL(`http://127.0.0.1${path}`), fetch: globalThis.fetch });

it('an id in capitals leads where the id leads', () => {
	const id = '0f8c1b2e-9a47-4d60-8e35-7c21d9b4aa06';
	expect(routed(`/api/v1/winders/${id.toUpperCase()}/live`)).toBe(`/api/v1/winders/${id}/live`);
	expect(routed(`/bench/${id.toUpperCase()}`)).toBe(`/bench/${id}`);
});

it('what is no id stays as it was written', () => {
	expect(routed('/first-password/AbCdEf')).toBe('/first-password/AbCdEf');
	expect(routed('/book/0F8C1B2E-9A47-4D60-8E35-7C21D9B4AA06x')).toBe('/book/0F8C1B2E-9A47-4D60-8E35-7C21D9B4AA06x');
});
