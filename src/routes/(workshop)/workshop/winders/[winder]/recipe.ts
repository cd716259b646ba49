/** Boot ids of the recipe are made by the shell, so that pasting it twice is two starts and not one repeated. */

/** Text inside single quotes of a POSIX shell. */
function quoted(text: string): string {
	return `'${text.replaceAll("'", `'\\''`)}'`;
}

/**
 * A shell recipe that sends three lines as a winder would: birth, an event, one turn. It runs as pasted in the program's
 * folder, where `npm run -s line` puts the checksum on a line.
 *
 * @param origin this server as the reader's browser reached it, such as `http://bench.local:4173`
 * @param linkKey the key just made, or null when it is no longer known here
 */
export function curlRecipe(origin: string, winderId: string, linkKey: string | null): string {
	const url = `${origin}/api/v1/winders/${winderId}/lines`;
	return [
		`LINK_KEY=${quoted(linkKey ?? 'paste the link key here')}`,
		`BOOT=$(od -An -N4 -tx1 /dev/urandom | tr -d ' \\n' | tr a-f A-F)`,
		`{ npm run -s line -- "HI p=1 dev=by-hand b=$BOOT n=0 e=0 f=0 v=0 t=0"`,
		`  npm run -s line -- "E b=$BOOT n=1 e=1 f=0 v=0 t=40 k=go"`,
		`  npm run -s line -- "T b=$BOOT n=2 e=1 f=1 v=0 r=60 t=1040"`,
		`} | curl -sS --data-binary @- -H "Authorization: Bearer $LINK_KEY" \\`,
		`  -H 'Content-Type: text/plain' ${quoted(url)}`
	].join('\n');
}
