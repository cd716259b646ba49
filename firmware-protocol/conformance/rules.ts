import {
	answersKeptMin,
	parseDeviceLine,
	parseHostLine,
	refusalText,
	tickMsMax,
	type DeviceLine,
	type Event,
	type Hi,
	type HostLine,
	type Refusal,
	type Tick
} from '../../src/lib/turnline/index.ts';
import type { Entry, Probe, Session } from './session.ts';

/** What a winder must do, looked for in a recorded session. Pure: the same record is always judged alike. */

export type Level = 'basic' | 'full';

/**
 * pass and fail: seen, and right or wrong. not-shown: the level asks for it and the session did not show it, so that it is not
 * proved. not-asked: it cannot come up with this winder, or over this link.
 */
export type Result = 'pass' | 'fail' | 'not-shown' | 'not-asked';

export interface Verdict {
	id: string;
	says: string;
	result: Result;
	/** In plain words: what was wrong, or why nothing was shown. Empty for a pass. */
	why: string;
	/** Numbers of the record's lines that show it, the first few. */
	lines: number[];
}

/** "At once", with the way there and back and a board's main loop. */
export const answerMsMax = 1_000;
/** A tick late by half of what it may take is a clock and a cable, not silence. */
const silenceMsMax = tickMsMax * 1.5;
/** An event goes again after 2 s at the earliest; a device that looks every 2 s sends it within 4. */
export const againMsMax = 5_000;
/** As long as the core may take to look twice, so that an event not freed would have come. */
export const quietMs = 4_500;
/** Events sent before the acknowledgement arrived. */
const crossedMs = 1_000;
/** A full ring at 200 lines a second, and the way. */
export const syncMsMax = 2_000;
/** "The oldest few at a time". */
const resentAtOnce = 8;
/** Fewer ticks say nothing about a rate. */
const rateTicksMin = 5;
const linesShownMax = 5;

interface Said {
	no: number;
	atMs: number;
	line: HostLine | null;
	probe: Probe | undefined;
	text: string;
}
interface Heard<L = DeviceLine> {
	no: number;
	atMs: number;
	text: string;
	line: L;
}
interface Refused {
	no: number;
	why: Refusal;
	key: string | undefined;
}

type Counted = Heard<Tick | Event>;

/** The record read once: what every rule needs. */
interface Facts {
	level: Level;
	endedMs: number;
	entries: readonly Entry[];
	heard: Heard[];
	refused: Refused[];
	said: Said[];
	/** Ticks and events, each the first time, as they came. */
	fresh: Counted[];
	/** The boot the session began with. */
	boot: string | null;
	/** The first HI. */
	birth: Hi | null;
	/** The first HI of each link; what came before it may be lines sent again, of which nobody knows what they follow. */
	births: Heard<Hi>[];
	events: Heard<Event>[];
	/** Events, each the first time. */
	newEvents: Heard<Event>[];
	turns: number;
}

type Finding = Pick<Verdict, 'result' | 'why' | 'lines'>;
interface Rule {
	id: string;
	says: string;
	/** The lowest level that asks for it. */
	level: Level;
	/** Judged though no line could be read. */
	blind?: true;
	look(facts: Facts): Finding;
}

const pass = (...lines: number[]): Finding => ({ result: 'pass', why: '', lines: lines.slice(0, linesShownMax) });
const fail = (why: string, ...lines: number[]): Finding => ({
	result: 'fail',
	why,
	lines: lines.slice(0, linesShownMax)
});
const notShown = (why: string): Finding => ({ result: 'not-shown', why, lines: [] });
const notAsked = (why: string): Finding => ({ result: 'not-asked', why, lines: [] });
const unlessBasic = ({ level }: Facts, why: string) => (level === 'basic' ? notAsked(why) : notShown(why));

const isCounted = (heard: Heard): heard is Counted => heard.line.verb === 'T' || heard.line.verb === 'E';
const isEvent = (heard: Heard): heard is Heard<Event> => heard.line.verb === 'E';
const isHi = (heard: Heard): heard is Heard<Hi> => heard.line.verb === 'HI';

export const rules: readonly Rule[] = [
	{
		id: 'checksum',
		says: 'Every line carries its right checksum',
		level: 'basic',
		blind: true,
		look({ refused, heard }) {
			const wrong = refused.filter(({ why }) => why.includes('checksum'));
			if (wrong.length > 0) return fail(reasons(wrong), ...wrong.map(({ no }) => no));
			return heard.length > 0 ? pass(heard[0]!.no) : notShown('no line was heard');
		}
	},
	{
		id: 'form',
		says: 'Every line is of the grammar: known verbs, the keys they must carry, values in their range',
		level: 'basic',
		look({ refused, heard }) {
			const wrong = refused.filter(({ why }) => !why.includes('checksum'));
			return wrong.length > 0 ? fail(reasons(wrong), ...wrong.map(({ no }) => no)) : pass(heard[0]!.no);
		}
	},
	{
		id: 'birth-first',
		says: 'The first line of a start, and of every new link, is HI',
		level: 'basic',
		look({ entries, heard }) {
			const links = entries.filter(({ from }) => from === 'link');
			const firsts = links.flatMap(({ no }) => heard.find((one) => one.no > no) ?? []);
			const wrong = firsts.filter((first) => !isHi(first));
			if (wrong.length > 0) return fail(`it was ${wrong[0]!.line.verb}`, ...wrong.map(({ no }) => no));
			if (firsts.length > 0) return pass(...firsts.map(({ no }) => no));
			return isHi(heard[0]!)
				? pass(heard[0].no)
				: notAsked('the winder ran before the cable was opened; restart it while this listens to see it');
		}
	},
	{
		id: 'one-boot',
		says: 'One start has one boot number, and the winder does not restart by itself',
		level: 'basic',
		look({ heard, boot }) {
			const other = heard.filter(({ line }) => line.b !== undefined && line.b !== boot);
			return other.length > 0
				? fail(`boot ${other[0]!.line.b} where ${boot} began`, ...other.map(({ no }) => no))
				: pass(heard[0]!.no);
		}
	},
	{
		id: 'totals-grow',
		says: 'f and v never fall',
		level: 'basic',
		look(facts) {
			const falls = fallsIn(facts).filter(({ toZero }) => !toZero);
			if (falls.length > 0) return fail(falls[0]!.why, ...falls.flatMap(({ lines }) => lines));
			return facts.turns > 0 ? pass(facts.fresh.at(-1)!.no) : notShown('nothing turned');
		}
	},
	{
		id: 'no-zeroing',
		says: 'The winder never sets its totals to zero, not for a new plan either',
		level: 'basic',
		look(facts) {
			const falls = fallsIn(facts).filter(({ toZero }) => toZero);
			if (falls.length > 0) return fail(falls[0]!.why, ...falls.flatMap(({ lines }) => lines));
			const turned = facts.heard.find(({ line }) => 'f' in line && line.f + line.v > 0);
			const set = turned && facts.said.find(({ no, line }) => no > turned.no && line?.verb === 'SET');
			const after = set && facts.heard.find(({ no, line }) => no > set.no && 'f' in line);
			return after ? pass(set.no, after.no) : notShown('nothing turned before a plan came');
		}
	},
	{
		id: 'line-numbers',
		says: 'n rises by one from each T or E to the next, and no number is given twice',
		level: 'basic',
		look: lineNumbers
	},
	{
		id: 'event-numbers',
		says: 'Events are numbered without gaps, and every line says in e how many there were',
		level: 'basic',
		look: eventNumbers
	},
	{
		id: 'answers-ask',
		says: '? is answered at once with HI',
		level: 'basic',
		look: (facts) =>
			asked(
				facts,
				({ line, probe }) => line?.verb === '?' && probe === undefined,
				(_, { line }) => (line.verb === 'HI' ? 'right' : null)
			)
	},
	{
		id: 'answers-set',
		says: 'SET is answered OK or NO with its id, as often as it comes',
		level: 'basic',
		look: (facts) =>
			asked(
				facts,
				(said) => ownSet(facts, said) && said.probe === undefined,
				(said, { line }) => (isAnswerTo(said, line) ? 'right' : null)
			)
	},
	{
		id: 'set-other-boot',
		says: 'SET for another boot is answered NO why=boot and not acted on',
		level: 'basic',
		look: (facts) =>
			asked(
				facts,
				({ line, probe }) => line?.verb === 'SET' && line.b !== facts.boot && probe === undefined,
				(said, { line }) => {
					if (!isAnswerTo(said, line)) return null;
					return line.verb === 'NO' && line.why === 'boot' ? 'right' : `answered ${answerText(line)}`;
				}
			)
	},
	{
		id: 'answers-sync',
		says: 'SYNC brings back every event after its e, or is answered NO',
		level: 'basic',
		look(facts) {
			const shown: number[] = [];
			for (const sync of syncs(facts)) {
				if (sync.needed.length === 0) continue;
				const missing = sync.needed.filter(({ line }) => !sync.came.some((one) => one.line.e === line.e));
				if (missing.length > 0 && sync.no === undefined) {
					if (sync.cut) continue;
					const numbers = missing.map(({ line }) => line.e).join(', ');
					return fail(`event ${numbers} did not come again and nothing was answered`, sync.said.no);
				}
				shown.push(sync.said.no);
			}
			return shown.length > 0 ? pass(...shown) : unlessBasic(facts, 'the winder sent no event');
		}
	},
	{
		id: 'ack-frees',
		says: 'An acknowledged event is not sent again',
		level: 'basic',
		look: ackFrees
	},
	{
		id: 'speaks-standing',
		says: 'The winder speaks at least once a second while it stands',
		level: 'basic',
		blind: true,
		look: speaksStanding
	},
	{
		id: 'speaks-turning',
		says: 'While it turns, ticks come at the pace that HI promised in rep',
		level: 'full',
		look: speaksTurning
	},
	{
		id: 'event-again',
		says: 'An event that is not acknowledged goes again unasked',
		level: 'full',
		look: eventAgain
	},
	{
		id: 'same-again',
		says: 'A line sent again is the same to the letter',
		level: 'full',
		look({ events, fresh }) {
			const repeats = events.flatMap((event) => {
				const first = fresh.find(({ line }) => line.verb === 'E' && line.b === event.line.b && line.e === event.line.e);
				return first && first.no < event.no && first.line.n === event.line.n ? [{ first, event }] : [];
			});
			const wrong = repeats.find(({ first, event }) => first.text !== event.text);
			if (wrong) return fail('it changed', wrong.first.no, wrong.event.no);
			return repeats.length > 0 ? pass(repeats[0]!.first.no, repeats[0]!.event.no) : notShown('no line came again');
		}
	},
	{
		id: 'own-ack-only',
		says: 'An event is freed by its own acknowledgement (e) alone, never by n',
		level: 'full',
		look(facts) {
			const shown: number[] = [];
			for (const { said, needed, came, no, acked, ackedN } of syncs(facts)) {
				const owed = needed.filter(({ line }) => line.e > acked && line.n <= ackedN);
				const missing = owed.filter(({ line }) => !came.some((one) => one.line.e === line.e));
				if (owed.length === 0 || (missing.length > 0 && no === undefined)) continue;
				if (missing.length > 0)
					return fail(
						`event ${missing[0]!.line.e} was gone, and only lines up to n=${ackedN} were acknowledged`,
						said.no,
						no!
					);
				shown.push(said.no);
			}
			return shown.length > 0 ? pass(...shown) : notShown('no SYNC after an ACK of lines alone brought events back');
		}
	},
	{
		id: 'acted-once',
		says: `A command that comes again under its id is answered as before and not acted on again (the last ${answersKeptMin} are remembered)`,
		level: 'full',
		look: actedOnce
	},
	{
		id: 'overtaken',
		says: 'A SET whose id lies behind the newest is answered NO why=old',
		level: 'full',
		look: (facts) =>
			asked(
				facts,
				({ probe }) => probe === 'overtaken',
				(said, { line }) => {
					if (!isAnswerTo(said, line)) return null;
					return line.verb === 'NO' && line.why === 'old' ? 'right' : `answered ${answerText(line)}`;
				}
			)
	},
	{
		id: 'stop-other-boot',
		says: 'STOP for another boot is answered NO and not acted on',
		level: 'full',
		look: (facts) =>
			asked(
				facts,
				({ line }) => line?.verb === 'STOP' && line.b !== facts.boot,
				(said, { line }) => {
					if (!isAnswerTo(said, line)) return null;
					return line.verb === 'NO' && (line.why === 'boot' || line.why === 'unwired')
						? 'right'
						: `answered ${answerText(line)}`;
				}
			)
	},
	{
		id: 'unknown-verb',
		says: 'A verb it does not know is answered NO why=verb, and changes nothing',
		level: 'full',
		look: (facts) =>
			asked(
				facts,
				({ probe }) => probe === 'unknown-verb',
				(_, { line }) => (line.verb === 'NO' && line.id === undefined && line.why === 'verb' ? 'right' : null)
			)
	},
	{
		id: 'unknown-key',
		says: 'A key it does not know is ignored, and the line acted on',
		level: 'full',
		look(facts) {
			const key = facts.said.find(({ probe }) => probe === 'unknown-key');
			const plain = facts.said.findLast(
				(said) => ownSet(facts, said) && said.probe === undefined && said.no < (key?.no ?? 0)
			);
			const usual = plain && answerTo(facts, plain);
			return asked(
				facts,
				({ probe }) => probe === 'unknown-key',
				(said, { line }) => {
					if (!isAnswerTo(said, line)) return null;
					return usual?.line.verb === 'OK' && line.verb !== 'OK' ? `answered ${answerText(line)}` : 'right';
				}
			);
		}
	},
	{
		id: 'spoilt-not-acted',
		says: 'A command with a wrong checksum, or none, is neither acted on nor answered',
		level: 'full',
		look(facts) {
			const spoilt = facts.said.filter(({ probe }) => probe === 'spoilt');
			const answered = spoilt.flatMap((said) => {
				const answer =
					idIn(said.text) === null
						? undefined
						: facts.heard.find(({ no, line }) => no > said.no && answersId(line, idIn(said.text)!));
				return answer ? [said.no, answer.no] : [];
			});
			if (answered.length > 0) return fail('it was answered', ...answered);
			const seen = spoilt.filter(({ atMs }) => facts.endedMs >= atMs + answerMsMax);
			return seen.length > 0 ? pass(...seen.map(({ no }) => no)) : notShown('the session ended before');
		}
	},
	{
		id: 'dropped-to-lf',
		says: 'A line that is too long, or holds a byte over 7F, is dropped to its LF, and the next line is heard',
		level: 'full',
		look(facts) {
			const dropped = facts.said.filter(({ probe }) => probe === 'dropped');
			for (const said of dropped) {
				const answer = facts.heard.find(({ no, line }) => no > said.no && answersId(line, idIn(said.text) ?? -1));
				if (answer) return fail('it was answered', said.no, answer.no);
			}
			return asked(
				facts,
				({ probe }) => probe === 'after-dropped',
				(_, { line }) => (line.verb === 'HI' ? 'right' : null)
			);
		}
	}
];

/** Judges a session by every rule its level asks for. */
export function judge(session: Session, level: Level): Verdict[] {
	const facts = factsOf(session, level);
	return rules
		.filter((rule) => level === 'full' || rule.level === 'basic')
		.map((rule) => {
			const finding =
				facts.heard.length === 0 && !rule.blind ? notShown('no line of the winder could be read') : rule.look(facts);
			return { id: rule.id, says: rule.says, ...finding };
		});
}

function factsOf({ entries, endedMs }: Session, level: Level): Facts {
	const heard: Heard[] = [];
	const refused: Refused[] = [];
	const said: Said[] = [];
	for (const { no, atMs, from, text, probe, dropped } of entries) {
		if (from === 'host') {
			const parsed = parseHostLine(text);
			said.push({ no, atMs, text, probe, line: parsed.ok ? parsed.line : null });
		}
		if (from !== 'winder') continue;
		if (dropped) {
			refused.push({ no, why: dropped, key: undefined });
			continue;
		}
		const parsed = parseDeviceLine(text);
		if (!parsed.ok) refused.push({ no, why: parsed.why, key: parsed.key });
		else if (parsed.line) heard.push({ no, atMs, text: text.replace(/\r$/, ''), line: parsed.line });
	}
	const seen = new Set<string>();
	const fresh = heard.filter(isCounted).filter(({ line, text }) => {
		// An event that came changed is the same event; a tick with other content under its number is another line.
		const key = line.verb === 'E' ? `${line.b} E ${line.n} ${line.e}` : text;
		if (seen.has(key)) return false;
		seen.add(key);
		return true;
	});
	const events = heard.filter(isEvent);
	const his = heard.filter(isHi);
	const links = entries.filter(({ from }) => from === 'link' || from === 'cable');
	const totals = heard.flatMap(({ line }) => ('f' in line ? [line.f + line.v] : []));
	return {
		level,
		endedMs,
		entries,
		heard,
		refused,
		said,
		fresh,
		boot: heard.find(({ line }) => line.b !== undefined)?.line.b ?? null,
		birth: his[0]?.line ?? null,
		births: links.flatMap((link) => his.find(({ no }) => no > link.no) ?? []),
		events,
		newEvents: fresh.filter(isEvent),
		turns: totals.length > 0 ? Math.max(...totals) - totals[0]! : 0
	};
}

function reasons(refused: readonly Refused[]): string {
	const texts = new Set(refused.map(({ why, key }) => refusalText(why, key)));
	return [...texts].slice(0, 3).join('; ');
}

function answersId(line: DeviceLine, id: number): boolean {
	return (line.verb === 'OK' || line.verb === 'NO') && line.id === id;
}

const idIn = (text: string) => {
	const found = / id=(\d+)/.exec(text);
	return found ? Number(found[1]) : null;
};

function isAnswerTo(said: Said, line: DeviceLine): line is Extract<DeviceLine, { verb: 'OK' | 'NO' }> {
	const id = idIn(said.text);
	return id !== null && answersId(line, id);
}

const answerText = (line: DeviceLine) => `${line.verb}${line.verb === 'NO' && line.why ? ` why=${line.why}` : ''}`;

function ownSet({ boot }: Facts, { line }: Said): boolean {
	return line?.verb === 'SET' && line.b === boot;
}

/** The first answer after a line, before the same id is said again. */
function answerTo({ heard, said }: Facts, asked: Said): Heard | undefined {
	const next = said.find(({ no, text }) => no > asked.no && idIn(text) === idIn(asked.text))?.no ?? Infinity;
	return heard.find(({ no, line }) => no > asked.no && no < next && isAnswerTo(asked, line));
}

/**
 * Lines of the host that want an answer in time. `take` says of what is heard behind one: 'right', what is wrong with it, or null
 * where it is no answer. Two of a kind need two answers.
 */
function asked(
	facts: Facts,
	wants: (said: Said) => boolean,
	take: (said: Said, heard: Heard) => 'right' | string | null
): Finding {
	const shown: number[] = [];
	const taken = new Set<number>();
	for (const said of facts.said.filter(wants)) {
		const answer = facts.heard.find(
			(heard) =>
				heard.no > said.no &&
				heard.atMs <= said.atMs + answerMsMax &&
				!taken.has(heard.no) &&
				take(said, heard) !== null
		);
		if (!answer) {
			if (facts.endedMs < said.atMs + answerMsMax) continue;
			return fail(`no answer within ${answerMsMax / 1000} s`, said.no);
		}
		taken.add(answer.no);
		const verdict = take(said, answer)!;
		if (verdict !== 'right') return fail(verdict, said.no, answer.no);
		shown.push(said.no, answer.no);
	}
	return shown.length > 0 ? pass(...shown) : notShown('the session ended before it was asked');
}

interface Fall {
	toZero: boolean;
	why: string;
	lines: number[];
}

/** Where totals went back. Kept lines are compared in the order of their numbers; a HI only with what came before it. */
function fallsIn({ heard }: Facts): Fall[] {
	const falls: Fall[] = [];
	let top: Counted | null = null;
	let hi: Heard<Hi> | null = null;
	const compare = (before: Heard<Hi> | Counted | null, now: Heard<Hi> | Counted) => {
		if (!before || before.line.b !== now.line.b) return;
		const { f, v } = now.line;
		if (f >= before.line.f && v >= before.line.v) return;
		falls.push({
			toZero: f + v === 0,
			why: `f=${before.line.f} v=${before.line.v} became f=${f} v=${v}`,
			lines: [before.no, now.no]
		});
	};
	for (const one of heard) {
		if (isHi(one)) {
			compare(hi && (!top || hi.no > top.no) ? hi : top, one);
			hi = one;
		} else if (isCounted(one)) {
			if (top && top.line.b === one.line.b && one.line.n <= top.line.n) continue;
			compare(top, one);
			top = one;
		}
	}
	return falls;
}

function lineNumbers({ fresh, refused, births }: Facts): Finding {
	const byNumber = new Map<string, Counted>();
	let top: { no: number; b: string; n: number } | null = null;
	/** Up to this number lines are kept ones, sent at a new link in their own order and thinned. */
	let kept = 0;
	const shown: number[] = [];
	let birth = 0;
	for (const one of fresh) {
		for (; births[birth] && births[birth]!.no < one.no; birth++) {
			const { no, line } = births[birth]!;
			top = { no, b: line.b, n: line.n };
			kept = line.n;
		}
		const { b, n, verb } = one.line;
		const before = byNumber.get(`${b} ${n}`);
		if (before) return fail(`n=${n} stands on two different lines`, before.no, one.no);
		byNumber.set(`${b} ${n}`, one);
		if (birth === 0) continue;
		if (top?.b !== b || n > top.n) {
			const from: { no: number; b: string; n: number } | null = top;
			// What was spoilt on the way had a number too.
			const lost = from ? refused.filter(({ no }) => no > from.no && no < one.no).length : 0;
			if (from && from.b === b && n > from.n + 1 + lost) return fail(`n=${n} came after n=${from.n}`, from.no, one.no);
			top = { b, n, no: one.no };
			shown.push(one.no);
		} else if (n > kept) return fail(`${verb} n=${n} came for the first time after n=${top.n}`, top.no, one.no);
	}
	return shown.length > 1 ? pass(shown[0]!, shown.at(-1)!) : notShown('fewer than two lines came after a HI');
}

function eventNumbers(facts: Facts): Finding {
	const { fresh, newEvents, refused, birth, endedMs } = facts;
	let top = { e: birth?.e ?? (newEvents[0]?.line.e ?? 1) - 1, no: 0 };
	for (const { no, line } of newEvents) {
		if (line.e <= top.e) {
			const other = newEvents.find((one) => one.no < no && one.line.b === line.b && one.line.e === line.e);
			if (other) return fail(`e=${line.e} stands on two events`, other.no, no);
			continue;
		}
		const lost = refused.filter((one) => one.no > top.no && one.no < no).length;
		if (line.e > top.e + 1 + lost)
			return fail(`event ${line.e} came after event ${top.e}`, ...(top.no ? [top.no] : []), no);
		top = { e: line.e, no };
	}
	let before: Counted | null = null;
	for (const one of [...fresh].sort((a, b) => a.line.n - b.line.n)) {
		if (before && one.line.b === before.line.b && one.line.e < before.line.e)
			return fail(`e=${before.line.e} became e=${one.line.e}`, before.no, one.no);
		before = one;
	}
	const ahead = facts.heard.find(
		({ line, atMs }) => 'e' in line && line.e > top.e && line.b === facts.boot && endedMs >= atMs + answerMsMax
	);
	if (ahead && refused.length === 0)
		return fail(`it speaks of an event that never came; the last was ${top.e}`, ahead.no);
	return newEvents.length > 0 ? pass(...newEvents.map(({ no }) => no)) : unlessBasic(facts, 'the winder sent no event');
}

interface Synced {
	said: Said;
	/** Events it had sent that lie after the SYNC's e. */
	needed: Heard<Event>[];
	came: Heard<Event>[];
	/** The line that said NO. */
	no: number | undefined;
	/** Greatest e and n acknowledged before. */
	acked: number;
	ackedN: number;
	/** The session ended before the time was over. */
	cut: boolean;
}

function syncs({ said, newEvents, events, heard, endedMs, boot }: Facts): Synced[] {
	let acked = 0;
	let ackedN = 0;
	const found: Synced[] = [];
	for (const one of said) {
		const { line, no, atMs } = one;
		if (line?.verb === 'ACK' && line.b === boot) {
			acked = Math.max(acked, line.e);
			ackedN = Math.max(ackedN, line.n);
		}
		if (line?.verb !== 'SYNC' || line.b !== boot) continue;
		const inTime = (heard: Heard) => heard.no > no && heard.atMs <= atMs + syncMsMax;
		found.push({
			said: one,
			needed: newEvents.filter((event) => event.no < no && event.line.e > line.e),
			came: events.filter(inTime),
			no: heard.find((answer) => inTime(answer) && answer.line.verb === 'NO' && answer.line.id === undefined)?.no,
			acked,
			ackedN,
			cut: endedMs < atMs + syncMsMax
		});
	}
	return found;
}

function ackFrees(facts: Facts): Finding {
	const { said, events, boot, endedMs } = facts;
	const shown: number[] = [];
	for (const { line, no, atMs } of said) {
		if (line?.verb !== 'ACK' || line.b !== boot || line.e === 0) continue;
		if (!facts.newEvents.some((event) => event.no < no && event.line.e <= line.e)) continue;
		const sync = said.find((one) => one.no > no && one.line?.verb === 'SYNC');
		const untilMs = sync?.atMs ?? endedMs;
		const again = events.find(
			(event) =>
				event.line.e <= line.e && event.atMs > atMs + crossedMs && event.no > no && (!sync || event.no < sync.no)
		);
		if (again) return fail(`event ${again.line.e} came again after it was acknowledged`, no, again.no);
		if (untilMs >= atMs + quietMs) shown.push(no);
	}
	if (shown.length > 0) return pass(...shown);
	return unlessBasic(facts, 'no event was acknowledged long enough before the end');
}

function speaksStanding({ entries, endedMs, heard }: Facts): Finding {
	// Told by its first letter alone: a winder with another checksum is not silent.
	const spoken = entries.filter(({ from }) => from === 'winder');
	const first = spoken[0];
	if (!first) return fail('nothing was heard at all');
	const ticks = spoken.filter(({ text }) => text.startsWith('T '));
	const speeds = new Map(heard.map(({ no, line }) => [no, 'r' in line ? line.r : 0]));
	let before = first;
	let standing = 0;
	for (const tick of [...ticks, { no: 0, atMs: endedMs }]) {
		const turning = (speeds.get(before.no) ?? 0) !== 0;
		if (!turning && tick.atMs - before.atMs > silenceMsMax)
			return fail(
				`no tick for ${((tick.atMs - before.atMs) / 1000).toFixed(1)} s`,
				before.no,
				...(tick.no ? [tick.no] : [])
			);
		if (!turning && tick.no) standing++;
		if (tick.no) before = tick as Entry;
	}
	return standing >= 2 ? pass(ticks[0]!.no) : notShown('it never stood for as much as two ticks');
}

function speaksTurning({ fresh, birth }: Facts): Finding {
	const repMs = Math.min(birth?.rep ?? tickMsMax, tickMsMax);
	const ticks = fresh.filter(({ line }) => line.verb === 'T') as Heard<Tick>[];
	const gaps = ticks.flatMap((tick, at) => {
		const before = ticks[at - 1];
		if (!before || before.line.r === 0 || tick.line.r === 0 || tick.line.n < before.line.n) return [];
		return [{ ms: (tick.line.t - before.line.t + 2 ** 32) % 2 ** 32, no: tick.no }];
	});
	if (gaps.length < rateTicksMin) return notShown('it did not turn long enough');
	const middle = [...gaps].sort((a, b) => a.ms - b.ms)[Math.floor(gaps.length / 2)]!;
	// The main loop's own pace may add a little to each tick.
	if (middle.ms > repMs * 1.5 + 20 || (birth?.rep !== undefined && middle.ms < repMs * 0.5))
		return fail(`ticks come every ${middle.ms} ms where ${repMs} ms are promised`, gaps[0]!.no, gaps.at(-1)!.no);
	return pass(gaps[0]!.no, gaps.at(-1)!.no);
}

function eventAgain({ newEvents, events, said, endedMs, boot }: Facts): Finding {
	const shown: number[] = [];
	for (const event of newEvents) {
		const { no, atMs, line } = event;
		const disturbed = said.find(
			(one) =>
				one.no > no &&
				(one.line?.verb === 'SYNC' || (one.line?.verb === 'ACK' && one.line.b === boot && one.line.e >= line.e))
		);
		const again = events.find(
			(one) => one.no > no && one.line.e === line.e && one.line.b === line.b && (!disturbed || one.no < disturbed.no)
		);
		if (again) {
			shown.push(no, again.no);
			continue;
		}
		const waitedMs = (disturbed?.atMs ?? endedMs) - atMs;
		const older = newEvents.filter((one) => one.no < no && one.line.e > 0).length;
		if (waitedMs >= againMsMax && older < resentAtOnce)
			return fail(`event ${line.e} came once and not again in ${againMsMax / 1000} s`, no);
	}
	return shown.length > 0 ? pass(...shown) : notShown('no event was sent, or none waited long enough');
}

function actedOnce(facts: Facts): Finding {
	const shown: number[] = [];
	const firsts = new Map<number, Said>();
	/** Targets that came under an id that had been answered: nobody may act on them. */
	const repeated = new Map<number, Said>();
	for (const said of facts.said) {
		if (!ownSet(facts, said) || said.line?.verb !== 'SET') continue;
		const first = firsts.get(said.line.id);
		if (!first) {
			firsts.set(said.line.id, said);
			continue;
		}
		const one = answerTo(facts, first);
		const two = answerTo(facts, said);
		if (!one || !two) continue;
		if (answerText(one.line) !== answerText(two.line))
			return fail(`answered ${answerText(one.line)}, then ${answerText(two.line)}`, said.no, two.no);
		if (first.line?.verb === 'SET' && first.line.tgt !== said.line.tgt) repeated.set(said.line.tgt, said);
		shown.push(said.no, two.no);
	}
	for (const { no, line } of facts.newEvents) {
		const said = line.k === 'at' ? repeated.get(line.f - line.v) : undefined;
		if (said && said.no < no)
			return fail(`the target of the command that came again was called, f − v = ${line.f - line.v}`, said.no, no);
	}
	return shown.length > 0 ? pass(...shown) : notShown('no command was answered twice');
}
