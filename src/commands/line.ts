/** `npm run -s line`: adds the checksum to lines typed by hand, or says what is wrong with a line. */
import { createInterface } from 'node:readline';
import { pathToFileURL } from 'node:url';
import { parseLine, refusalText, withChecksum, type Parsed } from '../lib/turnline/index.ts';

const help = `Adds the checksum to a line of Turnline and prints it.

  npm run -s line -- "T b=5C0E91A7 n=2 e=1 f=1 v=0 r=58 t=1040"
  npm run -s line < lines.txt

  --check   take each line as it is, with its checksum, and say whether it is right
  --help    this text

One line per argument, in quotes, or one per line of standard input. Empty lines and comments (#) are left out.
Refused lines are named on standard error with the reason, and the exit code is 1. The lines are described in
firmware-protocol/PROTOCOL.md.
`;

export interface Told {
	out: string[];
	err: string[];
}

/** A line without its checksum, or already with the right one, as it goes on the wire; or why not. */
export function addChecksum(text: string): Told {
	const bare = text.replace(/\r?\n?$/, '');
	const whole = bare === '' || bare.startsWith('#') || bare.includes('~') ? bare : withChecksum(bare);
	const parsed = parseLine(whole);
	if (!parsed.ok) return { out: [], err: [`refused: ${sentence(parsed)}`] };
	return { out: parsed.line ? [whole] : [], err: [] };
}

/** The verdict on a line as it is. */
export function checkLine(text: string): Told {
	const parsed = parseLine(text);
	if (!parsed.ok) return { out: [], err: [`refused, ${parsed.why}: ${sentence(parsed)}`] };
	return { out: [parsed.line ? `right: ${JSON.stringify(parsed.line)}` : 'nothing: ignored'], err: [] };
}

function sentence({ why, key, verb }: Extract<Parsed, { ok: false }>): string {
	return (verb && why !== 'form' ? `${verb}: ` : '') + refusalText(why, key);
}

/** Runs the command over lines as they come; answers the exit code. */
export async function run(
	args: string[],
	input: Iterable<string> | AsyncIterable<string> | null,
	print: { out(text: string): void; err(text: string): void }
): Promise<number> {
	const texts = args.filter((arg) => !arg.startsWith('--'));
	const options = new Set(args.filter((arg) => arg.startsWith('--')));
	if (options.delete('--help')) {
		print.out(help.trimEnd());
		return 0;
	}
	const tell = options.delete('--check') ? checkLine : addChecksum;
	const [unknown] = options;
	if (unknown !== undefined) {
		print.err(`There is no option ${unknown}. Try --help.`);
		return 2;
	}
	if (texts.some((text) => /^[a-z]{1,4}=/.test(text))) {
		print.err('Put the whole line in quotes: npm run -s line -- "T b=5C0E91A7 n=2 …". Nothing was printed.');
		return 2;
	}
	if (texts.length === 0 && input === null) {
		print.err(help.trimEnd());
		return 2;
	}

	let number = 0;
	let code = 0;
	for await (const text of texts.length > 0 ? texts : input!) {
		number++;
		const { out, err } = tell(text);
		out.forEach(print.out);
		for (const message of err) {
			print.err(texts.length === 1 ? message : `line ${number}: ${message}`);
			code = 1;
		}
	}
	return code;
}

if (process.argv[1] && import.meta.url === pathToFileURL(process.argv[1]).href) {
	// A reader that has seen enough (head) closes the pipe: no fault of ours.
	process.stdout.on('error', () => process.exit(1));
	// Latin 1 leaves every byte one character, so that a byte over 7F is refused for what it is.
	process.stdin.setEncoding('latin1');
	const input = process.stdin.isTTY ? null : createInterface({ input: process.stdin, crlfDelay: Infinity });
	process.exitCode = await run(process.argv.slice(2), input, {
		out: (text) => process.stdout.write(`${text}\n`),
		err: (text) => process.stderr.write(`${text}\n`)
	});
	process.stdin.destroy();
}
