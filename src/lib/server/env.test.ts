import { describe, expect, test } from 'vitest';
import { EnvError, serverEnv, startEnv } from './env.ts';

const good = { DATABASE_URL: 'postgres://a:b@127.0.0.1/c', AUTH_SECRET: 'x'.repeat(32) };

function refusal(work: () => unknown): string {
	try {
		work();
	} catch (error) {
		if (error instanceof EnvError) return error.message;
		throw error;
	}
	throw new Error('nothing was refused');
}

describe('the environment of the server', () => {
	test('is taken as it is when it fits', () => {
		expect(serverEnv(good)).toEqual({
			databaseUrl: good.DATABASE_URL,
			authSecret: good.AUTH_SECRET,
			serialWinders: []
		});
	});

	test('names the variable, what came and an example', () => {
		const said = refusal(() => serverEnv({ ...good, DATABASE_URL: 'mysql://there' }));
		expect(said).toMatch(/^DATABASE_URL must be .*, but "mysql:\/\/there" came\. Example: postgres:\/\//);
	});

	test('says how long a bad secret is, and not what it is', () => {
		const said = refusal(() => serverEnv({ ...good, AUTH_SECRET: 'hunter2' }));
		expect(said).toContain('7 characters came');
		expect(said).not.toContain('hunter2');
	});

	test('names every variable that does not fit', () => {
		const said = refusal(() => serverEnv({}));
		expect(said).toContain('DATABASE_URL');
		expect(said).toContain('AUTH_SECRET');
		expect(said).toContain('nothing came');
	});
});

describe('the environment of the commands', () => {
	test('needs nothing to be set', () => {
		expect(startEnv({})).toEqual({
			host: '127.0.0.1',
			port: 4173,
			databaseUrl: null,
			authSecret: null,
			tlsCert: null,
			tlsKey: null,
			simulator: true,
			allowedHosts: [],
			trustProxy: false
		});
	});

	test('takes an empty variable for one that is not set', () => {
		expect(startEnv({ PORT: '', DATABASE_URL: '', SIMULATOR: '' })).toMatchObject({ port: 4173, databaseUrl: null });
	});

	test.each(['0', '65536', '4173x', '-1', '1e3', ' 80'])('refuses the port "%s"', (port) => {
		expect(refusal(() => startEnv({ PORT: port }))).toContain(
			`PORT must be a port number from 1 to 65535, but "${port}" came`
		);
	});

	test.each(['1', '65535'])('takes the port %s', (port) => {
		expect(startEnv({ PORT: port }).port).toBe(Number(port));
	});

	test('wants a certificate and a key, or neither', () => {
		expect(refusal(() => startEnv({ TLS_CERT: 'a.pem' }))).toContain('TLS_KEY is not');
		expect(refusal(() => startEnv({ TLS_KEY: 'a.pem' }))).toContain('TLS_CERT is not');
	});

	test('reads a list of host names', () => {
		expect(startEnv({ ALLOWED_HOSTS: 'a.example, b.example c.example' }).allowedHosts).toEqual([
			'a.example',
			'b.example',
			'c.example'
		]);
		expect(refusal(() => startEnv({ ALLOWED_HOSTS: 'http://a.example/' }))).toContain('ALLOWED_HOSTS');
	});

	test('reads serial ports with the key of the winder at each', () => {
		expect(
			serverEnv({ ...good, WINDER_SERIAL: '/dev/ttyACM0=key-of-w-01,/dev/serial/by-id/a=key_of=w-02' })
		).toMatchObject({
			serialWinders: [
				{ path: '/dev/ttyACM0', linkKey: 'key-of-w-01' },
				{ path: '/dev/serial/by-id/a', linkKey: 'key_of=w-02' }
			]
		});
	});

	test.each(['/dev/ttyACM0', '/dev/ttyACM0=', 'ttyACM0=secret-of-w-01', '/dev/a=secret-of-w-01,/dev/a=secret-of-w-02'])(
		'refuses %s before anything starts, and shows no key',
		(value) => {
			const said = refusal(() => startEnv({ WINDER_SERIAL: value }));
			expect(said).toContain('WINDER_SERIAL must be serial ports');
			expect(said).not.toContain('secret-of-w');
		}
	);
});
