/** Something a person can put right. The message is whole sentences: what happened, what was kept, what to do. */
export class PlainError extends Error {
	override name = 'PlainError';
}

/** Ends a command with a sentence where one is known, and with everything there is where the program itself is wrong. */
export function sayAndFail(error: unknown): never {
	if (error instanceof PlainError || (error instanceof Error && error.name === 'EnvError')) {
		process.stderr.write(`\n${error.message}\n`);
	} else {
		console.error(error);
	}
	process.exit(1);
}

/** The errno name of a failed system call (`ENOSPC`), or '' where there is none. */
export function codeOf(error: unknown): string {
	const code = (error as { code?: unknown } | null)?.code;
	return typeof code === 'string' ? code : '';
}
