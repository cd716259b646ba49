/** Text inside single quotes of a POSIX shell. */
function quoted(text: string): string {
	return `'${text.replaceAll("'", `'\\''`)}'`;
}

/**
 * A shell recipe that sends three lines as a winder would: birth, a tick standing still, goodbye. Nothing turns, so a coil
 * that the bench takes meanwhile stays untouched and can be put back. It runs as pasted in the program's folder, where
 * `npm run -s line` puts the checksum on a line.
 *
 * @param origin this server as the reader's browser reached it, such as `http://bench.local:4173`
 * @param boot 8 hex digits, upper case; the same again repeats the lines, which changes nothing
 * @param linkKey the key just made, or null when it is no longer known here
 */
export function curlRecipe(origin: string, winderId: string, boot: string, linkKey: string | null): string {
	const url = `${origin}/api/v1/winders/${winderId}/lines`;
	return [
		`LINK_KEY=${quoted(linkKey ?? 'paste the link key here')}`,
		`npm run -s line -- "HI p=1 dev=by-hand b=${boot} n=0 e=0 f=0 v=0 t=0" \\`,
		`  "T b=${boot} n=1 e=0 f=0 v=0 r=0 t=1000" "BYE b=${boot}" |`,
		`  curl -sS --data-binary @- -H "Authorization: Bearer $LINK_KEY" \\`,
		`  -H 'Content-Type: text/plain' ${quoted(url)}`
	].join('\n');
}
