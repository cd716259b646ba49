import { hash, verify, type Options } from '@node-rs/argon2';
import { commonPasswords } from './common-passwords.ts';

/** NIST SP 800-63B-4, 3.1.1.2: at least 15 characters where a password is the only factor; no composition rules. */
export const passwordCharactersMin = 15;
/** The same section wants at least 64 allowed; 128 holds a long sentence and bounds the work of hashing. */
export const passwordCharactersMax = 128;

/**
 * OWASP Password Storage Cheat Sheet, argon2id minimum: 19 MiB, 2 passes, 1 lane. The package's default algorithm is
 * argon2id; its enum cannot be imported under isolatedModules, and a test reads the parameters back from a hash.
 */
const argon2id: Options = { memoryCost: 19_456, timeCost: 2, parallelism: 1 };

/** Characters are Unicode code points after NFC, so that one keyboard's é is another's (SP 800-63B-4, 3.1.1.2). */
export function normalisePassword(typed: string): string {
	return typed.normalize('NFC');
}

export async function hashPassword(typed: string): Promise<string> {
	return hash(normalisePassword(typed), argon2id);
}

let nobodysHash: Promise<string> | undefined;

/**
 * Whether this is the password behind the hash. Without a hash (unknown address, no password chosen yet) and for a
 * text too long to be one it does the same work and says no, so that the time taken tells nothing.
 */
export async function verifyPassword(passwordHash: string | null, typed: string): Promise<boolean> {
	nobodysHash ??= hashPassword(crypto.randomUUID());
	const possible = passwordHash !== null && [...typed].length <= passwordCharactersMax;
	const right = await verify(possible ? passwordHash : await nobodysHash, normalisePassword(typed.slice(0, 512)));
	return possible && right;
}

export type PasswordRefusal = 'too-short' | 'too-long' | 'common' | 'repeats' | 'sequence' | 'about-you';

/**
 * Why this password cannot be chosen, or null when it can.
 * @param about words a guesser tries first: the address, the person's and the workshop's name
 */
export function refusePassword(typed: string, about: readonly string[]): PasswordRefusal | null {
	const password = normalisePassword(typed);
	const characters = [...password].length;
	if (characters < passwordCharactersMin) return 'too-short';
	if (characters > passwordCharactersMax) return 'too-long';
	const lower = password.toLowerCase();
	const squeezed = lower.replace(/\s+/g, '');
	if (commonPasswords.has(lower) || commonPasswords.has(squeezed)) return 'common';
	if (isRepeat(squeezed) || new Set(squeezed).size < 5) return 'repeats';
	if (isSequence(squeezed)) return 'sequence';
	if (isAbout(lower, about)) return 'about-you';
	return null;
}

/** One short piece over and over, a cut-off last piece and a few characters behind it included: passwordpassword12. */
function isRepeat(text: string): boolean {
	// A piece as long as half the text repeats just twice; up to three characters after the repeats change nothing.
	for (let tail = 0; tail <= 3; tail++) {
		const body = text.slice(0, text.length - tail);
		for (let piece = 1; piece <= Math.floor(body.length / 2); piece++) {
			if (
				body ===
				body
					.slice(0, piece)
					.repeat(Math.ceil(body.length / piece))
					.slice(0, body.length)
			)
				return true;
		}
	}
	return false;
}

const rows = [
	'abcdefghijklmnopqrstuvwxyz',
	'01234567890123456789',
	'qwertyuiopasdfghjklzxcvbnm',
	'qwertzuiopasdfghjklyxcvbnm',
	'azertyuiopqsdfghjklmwxcvbn',
	'1qaz2wsx3edc4rfv5tgb6yhn7ujm8ik9ol0p',
	'qazwsxedcrfvtgbyhnujmikolp',
	'1q2w3e4r5t6y7u8i9o0p',
	'q1w2e3r4t5y6u7i8o9p0',
	'!@#$%^&*()_+',
	'!"#¤%&/()=?',
	'!"§$%&/()=?'
];
const runs = rows.flatMap((row) => [row, [...row].reverse().join('')]);

/** Made of runs along the alphabet, the digits or a row of keys, four or more at a time, and hardly anything else. */
function isSequence(text: string): boolean {
	let at = 0;
	let outside = 0;
	while (at < text.length) {
		let length = 0;
		for (const run of runs) {
			while (at + length < text.length && run.includes(text.slice(at, at + length + 1))) length++;
		}
		if (length >= 4) at += length;
		else {
			outside++;
			at++;
		}
	}
	return outside <= 3;
}

/** Little else than words that stand on the door: what is left after taking them out is shorter than six characters. */
function isAbout(lower: string, about: readonly string[]): boolean {
	const words = [...about, 'turnstead']
		.flatMap((text) => [text, ...text.split(/[^\p{L}\p{N}]+/u)])
		.map((text) => text.normalize('NFC').toLowerCase().trim())
		.filter((word) => word.length >= 3)
		.toSorted((a, b) => b.length - a.length);
	let rest = lower;
	for (const word of words) rest = rest.split(word).join(' ');
	return rest.replace(/[^\p{L}\p{N}]+/gu, '').length < 6;
}

/** The reason as it stands under the field. */
export const passwordRefusals: Record<PasswordRefusal, string> = {
	'too-short': `Use at least ${passwordCharactersMin} characters. A short sentence is easy to remember.`,
	'too-long': `Use at most ${passwordCharactersMax} characters.`,
	common: 'This is one of the commonest passwords and would be tried first. Choose another.',
	repeats: 'This repeats the same few characters. Choose another.',
	sequence: 'This runs along the alphabet, the digits or the keyboard. Choose another.',
	'about-you': 'This is little else than your name, address or workshop. Choose another.'
};
