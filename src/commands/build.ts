import { createHash } from 'node:crypto';
import { existsSync, readFileSync, readdirSync, rmSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { childEnv } from '../lib/server/env.ts';
import { projectFolder } from './data-folder.ts';
import { PlainError } from './plain-error.ts';
import { run } from './processes.ts';

const MARK = join(projectFolder, 'build', 'made-from.sha256');

/** Builds what is served, unless what it is made from has not changed since. Throws PlainError with what vite said. */
export async function ensureBuilt(signal?: AbortSignal): Promise<'built' | 'kept'> {
	const now = sourcesHash();
	if (
		existsSync(MARK) &&
		existsSync(join(projectFolder, 'build', 'handler.js')) &&
		readFileSync(MARK, 'utf8') === now
	) {
		return 'kept';
	}
	// A build that is broken off must not look like one that was made.
	rmSync(MARK, { force: true });
	const vite = join(projectFolder, 'node_modules', 'vite', 'bin', 'vite.js');
	const { code, output } = await run(process.execPath, [vite, 'build', '--logLevel', 'warn'], {
		cwd: projectFolder,
		env: childEnv({ NODE_ENV: 'production' }),
		signal
	});
	if (code !== 0) {
		const reason = /ENOSPC|no space left/i.test(output)
			? 'The disk is full: make room, then start again.'
			: 'This is a fault of the program, or of a change made to it.';
		throw new PlainError(
			`The build failed. ${reason} Vite said:\n\n${output.trim().split('\n').slice(-30).join('\n')}`
		);
	}
	writeFileSync(MARK, now);
	return 'built';
}

/** Whether there is a build of these sources. */
export function isBuilt(hash = sourcesHash()): boolean {
	return (
		existsSync(join(projectFolder, 'build', 'handler.js')) && existsSync(MARK) && readFileSync(MARK, 'utf8') === hash
	);
}

/** Everything the build is made from: sources, static files, configuration, package versions and the Node that runs it. */
function sourcesHash(): string {
	const hash = createHash('sha256').update(process.version);
	const single = ['package-lock.json', 'svelte.config.js', 'vite.config.ts', 'tsconfig.json'];
	const files = [
		...single,
		...filesBelow('src').filter((file) => !beside(file)),
		...filesBelow('static'),
		...filesBelow('migrations')
	];
	for (const file of files) {
		const content = readFileSync(join(projectFolder, file));
		hash.update(`\0${file}\0${content.length}\0`).update(content);
	}
	return hash.digest('hex');
}

/** Sources that run beside the build, not in it. */
function beside(file: string): boolean {
	return file === 'src/entry.js' || file.startsWith('src/commands/') || file.endsWith('.test.ts');
}

function filesBelow(folder: string): string[] {
	return readdirSync(join(projectFolder, folder), { withFileTypes: true, recursive: true })
		.filter((entry) => entry.isFile())
		.map((entry) => join(entry.parentPath, entry.name).slice(projectFolder.length + 1))
		.sort();
}
