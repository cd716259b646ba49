import { existsSync, readdirSync, readFileSync } from 'node:fs';
import { join, relative, sep } from 'node:path';
import { fileURLToPath } from 'node:url';
import { describe, expect, it } from 'vitest';
import { rulesBroken } from './imports.ts';

const root = fileURLToPath(new URL('../../', import.meta.url));

function sources(): string[] {
	const folders = ['src', 'simulator', 'firmware-protocol', 'migrations', 'tests'].filter((name) =>
		existsSync(join(root, name))
	);
	const inFolders = folders.flatMap((folder) =>
		readdirSync(join(root, folder), { recursive: true, withFileTypes: true })
			.filter((entry) => entry.isFile())
			.map((entry) => relative(root, join(entry.parentPath, entry.name)))
	);
	return [...inFolders, ...readdirSync(root)]
		.map((path) => path.split(sep).join('/'))
		.filter((path) => /\.(ts|js|svelte)$/.test(path));
}

describe('who may know whom', () => {
	const paths = sources();

	it('is kept by every source', () => {
		expect(paths).toContain('src/lib/turnline/parse.ts');
		expect(paths).toContain('vite.config.ts');
		const broken = paths.flatMap((path) => rulesBroken({ path, text: readFileSync(join(root, path), 'utf8') }));
		expect(broken).toEqual([]);
		// Hundreds of sources are read and parsed: on a busy machine that may take longer than a unit test usually may.
	}, 60_000);
});

describe('the reader of imports', () => {
	const kept: [path: string, text: string][] = [
		['src/lib/turnline/a.ts', "import { b } from './b.ts'; import { z } from 'zod';"],
		['src/lib/turnline/a.test.ts', "import fc from 'fast-check'; import { readFileSync } from 'node:fs';"],
		['src/lib/winding/a.ts', "import type { Line } from '../turnline/types.ts';"],
		['src/lib/server/ingest/a.ts', "import { b } from '../db/b.ts'; import { c } from '$lib/winding/c.ts';"],
		['src/lib/server/db/a.ts', "import pg from 'pg'; import { sql } from 'kysely';"],
		['migrations/0002-a.ts', "import { sql } from 'kysely';"],
		['tests/db/a.test.ts', "import pg from 'pg'; import { b } from '../../src/lib/server/db/b.ts'; process.env.PATH;"],
		['src/routes/book/+page.server.ts', "import { b } from '$lib/server/db/b.ts';"],
		['src/routes/api/v1/+server.ts', "import { b } from '$lib/server/app.ts';"],
		['src/hooks.server.ts', "import { b } from '$lib/server/app.ts';"],
		['src/commands/a.ts', "import { b } from '../lib/server/env.ts';"],
		['src/lib/bench/a.ts', "import type { B } from '../server/b.ts'; type C = import('../server/b.ts').C;"],
		['src/entry.js', "process.env.A = 'b'; process.env['A'] ??= 'b'; delete process.env.A;"],
		['src/lib/server/env.ts', 'export const port = process.env.PORT;'],
		['simulator/main.ts', 'const key = process.env.KEY;'],
		['src/lib/serverless.ts', "import { b } from './server-words.ts';"],
		['simulator/a.ts', "import '../src/lib/turnline/b.ts'; import '../src/lib/winding/b.ts'; import 'ws';"],
		['firmware-protocol/bridge/a.ts', "import '../../src/lib/turnline/b.ts'; import 'node:fs';"],
		['firmware-protocol/bridge/a.ts', "import '../../src/lib/serial/index.ts';"],
		['firmware-protocol/bridge/main.ts', 'const key = process.env.KEY;'],
		['src/lib/serial/a.ts', "import 'serialport'; import 'node:fs'; import '../turnline/b.ts';"],
		['src/lib/server/ingest/a.ts', "import '../../serial/b.ts';"],
		[
			'src/lib/bench/a.ts',
			"// import pg from 'pg' and process.env\nconst a = \"import 'kysely'\"; const env = import.meta.env.DEV;"
		]
	];
	it.each(kept)('finds nothing wrong in %s with %s', (path, text) => {
		expect(rulesBroken({ path, text })).toEqual([]);
	});

	const planted: [path: string, text: string, says: RegExp][] = [
		['src/lib/turnline/a.ts', "import { readFileSync } from 'node:fs';", /pure library/],
		['src/lib/turnline/a.ts', "import { b } from '../winding/b.ts';", /pure library/],
		['src/lib/winding/a.ts', "import { b } from '$app/environment';", /pure library/],
		['src/lib/winding/a.ts', "import { b } from '$env/static/public';", /pure library/],
		['src/lib/winding/a.ts', "export { b } from '../server/b.ts';", /pure library/],
		['src/lib/coil/a.ts', "import { onMount } from 'svelte';", /pure library/],
		['src/lib/coil/a.ts', "const b = await import('zod-to-something');", /pure library/],
		['src/lib/bench/a.ts', "import { b } from '$lib/server/b.ts';", /only server files/],
		['src/lib/bench/a.ts', "import { type B } from '../server/b.ts';", /only server files/],
		['src/lib/bench/a.ts', "const b = await import('../server/b.ts');", /only server files/],
		['src/lib/turnline/a.ts', "import type { B } from '../server/b.ts';", /pure library/],
		['src/lib/bench/a.ts', "import.meta.glob('../server/*.ts');", /only server files/],
		['src/lib/a.ts', "export * from './server';", /only server files/],
		['src/routes/+page.ts', "import { b } from '../lib/server/b.ts';", /only server files/],
		[
			'src/routes/+page.svelte',
			'<p>a</p>\n<script lang="ts">\nimport { b } from \'$lib/server/b.ts\';\n</script>',
			/only server/
		],
		['src/routes/+page.svelte', "{#await import('$lib/server/b.ts') then b}{b}{/await}", /only server files/],
		['src/routes/+server.ts', "import { sql } from 'kysely';", /know the database/],
		['src/lib/server/ingest/a.ts', "import type { Kysely } from 'kysely';", /know the database/],
		['src/commands/a.ts', "import pg from 'pg';", /know the database/],
		['src/lib/server/ingest/a.ts', "import { sql } from 'kysely/helpers/postgres';", /know the database/],
		['src/lib/server/auth/a.ts', 'const a = process.env.SECRET;', /reads the environment/],
		['src/entry.js', 'process.env.A = process.env.B;', /reads the environment/],
		['src/entry.js', 'const a = { ...process.env };', /reads the environment/],
		['src/lib/server/auth/a.ts', 'const { env } = process;', /reads the environment/],
		['src/lib/server/auth/a.ts', "const a = process['env'];", /reads the environment/],
		['src/lib/server/auth/a.ts', "import { env } from 'node:process';", /reads the environment/],
		['src/lib/server/auth/a.ts', "import { SECRET } from '$env/static/private';", /environment is read in/],
		['simulator/device.ts', 'const key = process.env.KEY;', /reads the environment/],
		['src/routes/+page.svelte', '<script>let a = process.env.A;</script>', /reads the environment/],
		[
			'simulator/a.ts',
			"import { b } from '../src/lib/server/b.ts';",
			/simulator imports lib\/turnline and lib\/winding/
		],
		['simulator/a.ts', "import { b } from '../src/commands/b.ts';", /simulator imports/],
		['simulator/a.test.ts', "import { b } from '../src/lib/server/b.ts';", /only server files/],
		['firmware-protocol/bridge/a.ts', "import { b } from '../../src/lib/winding/b.ts';", /firmware-protocol imports/],
		['src/lib/serial/a.ts', "import { b } from '../winding/b.ts';", /lib\/serial imports lib\/turnline/],
		['src/lib/bench/a.ts', "import { b } from '../serial/b.ts';", /only server files and the bridge/],
		['src/routes/+page.svelte', "{#await import('$lib/serial') then b}{b}{/await}", /only server files and the bridge/],
		['firmware-protocol/bridge/a.ts', "import { SerialPort } from 'serialport';", /only src\/lib\/serial/]
	];
	it.each(planted)('finds what %s does wrong with %s', (path, text, says) => {
		expect(rulesBroken({ path, text }).join('\n')).toMatch(says);
	});
});
