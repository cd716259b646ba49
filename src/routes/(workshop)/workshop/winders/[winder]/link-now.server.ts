import { turnstead } from '$lib/server/app';
import type { Carrier } from '$lib/server/ingest/types';
import { refusalText, type Refusal } from '$lib/turnline';
import type { LinkState, Notice } from '$lib/winding/types';

/** What the page of a winder follows: the link, the totals for the count check, the last lines and what was refused. */
export interface LinkNow {
	at: number;
	link: LinkState;
	ageMs: number | null;
	notices: Notice[];
	boot: string | null;
	forward: number;
	reverse: number;
	rpm: number;
	turning: boolean;
	/** The coil that counts what the spindle turns now; null: none lies on the bench. */
	coilOnBench: string | null;
	/** Coils that wait: the bench takes one as soon as the spindle turns. */
	waiting: number;
	lines: { at: number; text: string; verdict: string; refused: boolean }[];
	refused: { text: string; count: number }[];
	carriers: { name: string; lastAt: number; lines: number }[];
	/** What is wrong at the cable to the server itself, as sentences. */
	cableProblems: string[];
}

const carrierNames: Record<Carrier, string> = {
	http: 'HTTP, text lines',
	ndjson: 'HTTP, JSON lines',
	ws: 'WebSocket',
	serial: 'Cable at the server'
};

/** Enough to see what goes on, little enough to read. */
const linesShown = 12;

export async function linkNow(workshopId: string, winderId: string): Promise<LinkNow | null> {
	const { ingest, serialPorts } = turnstead();
	const view = await ingest.view(workshopId, winderId);
	if (!view) return null;
	const log = ingest.linkLog(workshopId, winderId);
	return {
		at: view.at,
		link: view.link,
		ageMs: view.ageMs,
		notices: view.notices,
		boot: view.boot,
		forward: view.forward,
		reverse: view.reverse,
		rpm: view.rpm,
		turning: view.turning,
		coilOnBench: view.run && view.run.state !== 'kept' && view.run.state !== 'set-aside' ? view.run.coil.name : null,
		waiting: view.waiting,
		lines: log.lines
			.slice(-linesShown)
			.reverse()
			.map(({ at, text, verdict }) => ({ at, text, ...told(verdict, text) })),
		refused: Object.entries(log.refused)
			.filter(([, count]) => count > 0)
			.map(([why, count]) => ({ text: refusalText(why as Refusal), count }))
			.sort((a, b) => b.count - a.count),
		carriers: (Object.keys(carrierNames) as Carrier[]).flatMap((name) => {
			const carrier = log.carriers[name];
			return carrier ? [{ name: carrierNames[name], lastAt: carrier.lastAt, lines: carrier.lines }] : [];
		}),
		cableProblems: serialPorts().flatMap(({ winder, problem }) =>
			winder?.workshopId === workshopId && winder.winderId === view.winderId && problem !== null ? [problem] : []
		)
	};
}

function told(
	verdict: 'stored' | 'thinned' | 'duplicate' | Refusal,
	text: string
): { verdict: string; refused: boolean } {
	if (verdict === 'stored') return { verdict: 'stored', refused: false };
	// A goodbye holds no count: nothing of it was thinned out.
	if (verdict === 'thinned' && text.startsWith('BYE')) return { verdict: 'heard', refused: false };
	if (verdict === 'thinned') return { verdict: 'counted, not stored (thinned)', refused: false };
	if (verdict === 'duplicate') return { verdict: 'came before', refused: false };
	return { verdict: `refused: ${refusalText(verdict)}`, refused: true };
}
