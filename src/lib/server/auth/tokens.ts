import { createHash, randomBytes } from 'node:crypto';

/** 256 bits: cannot be guessed, so a fast hash protects it where it is stored. */
const TOKEN_BYTES = 32;

/** A secret for an address or a header, 43 characters of base64url, and the hash under which it is stored. */
export function newToken(): { token: string; hash: Buffer } {
	const token = randomBytes(TOKEN_BYTES).toString('base64url');
	return { token, hash: hashToken(token) };
}

export function hashToken(token: string): Buffer {
	return createHash('sha256').update(token, 'utf8').digest();
}
