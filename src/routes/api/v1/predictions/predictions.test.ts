import { describe, expect, it } from 'vitest';
import { POST } from './+server.ts';

/** Two coils of AWG 42 on a generic bobbin: figures of the bobbin are from memory and are no check of themselves. */
const request = {
	bobbin: { straightM: 0.0508, endDiameterM: 0.006, traverseM: 0.0062 },
	wire: { awg: 42, diameterBasis: 'law', overallDiameterM: 0.000071 },
	packing: 0.8,
	turns: [5000],
	connection: 'single',
	temperatureC: 20
};

async function ask(
	body: unknown,
	from = '192.0.2.1'
): Promise<{ status: number; body: Record<string, unknown>; headers: Headers }> {
	const event = {
		request: new Request('http://127.0.0.1/api/v1/predictions', {
			method: 'POST',
			body: typeof body === 'string' ? body : JSON.stringify(body)
		}),
		getClientAddress: () => from
	};
	const answer = (await POST(event as never)) as Response;
	return { status: answer.status, body: (await answer.json()) as Record<string, unknown>, headers: answer.headers };
}

describe('a prediction', () => {
	it('answers the figures of the worked case', async () => {
		const { status, body } = await ask(request);
		expect(status).toBe(200);
		// Turn-by-turn sum of the racetrack with AWG 42 by the law of ASTM B258, copper of IEC 60028.
		expect(body.lengthM).toBeCloseTo(682.0702, 3);
		expect(body.resistanceOhm).toBeCloseTo(3732.039, 2);
		expect(body.meanTurnM).toBeCloseTo(0.13641404, 7);
		expect(body.outerLengthM).toBeCloseTo(0.0669633, 6);
		expect(body.outerWidthM).toBeCloseTo(0.0161633, 6);
		expect(body.copperMassKg).toBeCloseTo(0.019107, 5);
		expect(body.resistanceUncertaintyOhm).toBeGreaterThan(0);
		expect(body.peakHz).toBeNull();
	});

	it('rings into a load', async () => {
		const load = { volumePotOhm: 500e3, volume: 1, cableF: 500e-12, inputOhm: 1e6, coilF: 110e-12 };
		const { status, body } = await ask({ ...request, effectivePermeability: 2.4, load });
		expect(status).toBe(200);
		expect(body.peakHz).toBeGreaterThan(1000);
		expect(body.inductanceH).toBeCloseTo((body.airInductanceH as number) * 2.4, 6);
	});

	it('names each field at fault and its range', async () => {
		const { status, body, headers } = await ask({ ...request, packing: 7, turns: [0], temperatureC: 'warm' });
		expect(status).toBe(422);
		expect(headers.get('content-type')).toBe('application/problem+json');
		const errors = body.errors as { field: string; min?: number; max?: number }[];
		expect(errors.map(({ field }) => field).sort()).toEqual(['packing', 'temperatureC', 'turns.0']);
		expect(errors.find(({ field }) => field === 'packing')?.max).toBeLessThan(7);
	});

	it('refuses values that make no sense beside one another', async () => {
		const { status, body } = await ask({ ...request, wire: { diameterM: 0.0005, overallDiameterM: 0.0001 } });
		expect(status).toBe(422);
		expect(body.errors).toMatchObject([{ field: 'wire.overallDiameterM' }]);
	});

	it('refuses what is not JSON, and what is far too long', async () => {
		expect((await ask('turns=5000')).status).toBe(400);
		expect((await ask(' '.repeat(20_000))).status).toBe(413);
	});

	it('waits after many from one place, and from no other', async () => {
		for (let i = 0; i < 120; i += 1) await ask('{}', '192.0.2.7');
		const { status, headers } = await ask('{}', '192.0.2.7');
		expect(status).toBe(429);
		expect(Number(headers.get('retry-after'))).toBeGreaterThan(0);
		expect((await ask('{}', '192.0.2.8')).status).toBe(422);
	});
});
