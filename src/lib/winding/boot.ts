/**
 * One boot of a winder as its lines tell it: the greatest totals, which lines and events have come, and how its clock lies
 * to ours. Nothing here knows of runs.
 */

/** A moment of a boot with its totals. `t` is unwrapped device milliseconds. */
export interface Point {
	t: number;
	f: number;
	v: number;
	/** Signed rpm. */
	r: number;
	k: string | null;
	/** Events so far at that moment. */
	e: number;
}

/** Totals far above what the spindle can turn: they wait for the maker's word. */
export interface Held {
	f: number;
	v: number;
	t: number;
	/** Totals at the moment of the jump: those it jumped from, and the first it jumped to. */
	fromF: number;
	fromV: number;
	firstF: number;
	firstV: number;
	at: number;
	/** Lines since that still speak of the old level. */
	against: number;
}

export interface BootState {
	b: string;
	/** Greatest line number taken in. */
	n: number;
	/** Events 1…e have all come (or are known to be lost). */
	e: number;
	/** Events beyond a gap, ascending, bounded. */
	eBeyond: number[];
	/** Greatest event number any line spoke of. */
	eTop: number;
	f: number;
	v: number;
	/** Latest moment heard of, unwrapped device ms. */
	t: number;
	/** Signed rpm at that moment. */
	r: number;
	turning: boolean;
	/** Wall ms at which it said goodbye; null while it is heard. */
	signedOffAt: number | null;
	/** Moment at which the totals last grew. */
	grownT: number;
	x: number;
	g: number;
	/** Line numbers taken in, as ascending pairs lo, hi; bounded by merging the lowest. */
	seen: number[];
	/** n, sum of the last lines taken in, flat, to notice the same number with another content. */
	recent: number[];
	firstAt: number;
	lastAt: number;
	/** Wall ms at device time 0 as first estimated; never changed, so that durations stay put. */
	birthAt: number;
	/** Smallest (received − t) of each of the last slices of a minute: [slice, offset]. */
	offsets: [number, number][];
	/** Latest (received − t). */
	offsetLast: number;
	/** Gap for which SYNC was asked (its e), how often, and when last. */
	syncFor: number;
	syncCount: number;
	syncAt: number;
	held: Held | null;
	/** Totals continued from an earlier boot: no question about the restart. */
	bridged: boolean;
	/** Live lines that came after another boot had taken over: two boards with one name. */
	alive: number;
	/** Last tick kept for storage. */
	keptT: number;
	keptTurns: number;
	keepNext: boolean;
}

const wrapMs = 2 ** 32;
/** Intervals of line numbers remembered; more gaps than this and the oldest count as taken in: only detail of speed is lost. */
const seenPairsMax = 48;
const eBeyondMax = 256;
const recentMax = 32;
const offsetSliceMs = 5_000;
const offsetWindowMs = 60_000;

export function newBoot(b: string, t: number, receivedAt: number, timeScale: number): BootState {
	const offset = receivedAt - t / timeScale;
	return {
		b,
		n: 0,
		e: 0,
		eBeyond: [],
		eTop: 0,
		f: 0,
		v: 0,
		t: -1,
		r: 0,
		turning: false,
		signedOffAt: null,
		grownT: -1,
		x: 0,
		g: 0,
		seen: [],
		recent: [],
		firstAt: receivedAt,
		lastAt: receivedAt,
		birthAt: offset,
		offsets: [],
		offsetLast: offset,
		syncFor: -1,
		syncCount: 0,
		syncAt: 0,
		held: null,
		bridged: false,
		alive: 0,
		keptT: -1e15,
		keptTurns: -1e15,
		keepNext: true
	};
}

/** A copy whose own fields and lists may be changed. */
export function copyBoot(boot: BootState): BootState {
	return {
		...boot,
		eBeyond: boot.eBeyond.slice(),
		seen: boot.seen.slice(),
		recent: boot.recent.slice(),
		offsets: boot.offsets.slice(),
		held: boot.held && { ...boot.held }
	};
}

/** Device time is a u32 that wraps after 49.7 days: the reading nearest to the latest moment known. */
export function unwrapT(boot: BootState | null, t: number): number {
	if (!boot || boot.t < 0) return t;
	const turnsOfClock = Math.round((boot.t - t) / wrapMs);
	return t + Math.max(0, turnsOfClock) * wrapMs;
}

export const net = (totals: { f: number; v: number }): number => totals.f - totals.v;

/** Whether this line number has been taken in. */
export function hasLine(boot: BootState, n: number): boolean {
	for (let i = 0; i < boot.seen.length; i += 2) {
		if (n < boot.seen[i]!) return false;
		if (n <= boot.seen[i + 1]!) return true;
	}
	return false;
}

export function addLine(boot: BootState, n: number, sum: number): void {
	boot.n = Math.max(boot.n, n);
	boot.recent.push(n, sum);
	if (boot.recent.length > recentMax * 2) boot.recent.splice(0, 2);
	const seen = boot.seen;
	// The common case first: the number after the highest.
	if (seen.length > 0 && n === seen[seen.length - 1]! + 1) {
		seen[seen.length - 1] = n;
	} else {
		let i = 0;
		while (i < seen.length && seen[i]! <= n) i += 2;
		seen.splice(i, 0, n, n);
		const merged: number[] = [];
		for (let j = 0; j < seen.length; j += 2) {
			const lo = seen[j]!;
			const hi = seen[j + 1]!;
			if (merged.length > 0 && lo <= merged[merged.length - 1]! + 1) {
				merged[merged.length - 1] = Math.max(merged[merged.length - 1]!, hi);
			} else merged.push(lo, hi);
		}
		boot.seen = merged;
	}
	while (boot.seen.length > seenPairsMax * 2) boot.seen.splice(1, 2);
}

/** A small sum of a line's content (FNV-1a over its figures), to tell a resend from another line of the same number. */
export function sumOf(point: Point): number {
	let hash = 0x811c9dc5;
	for (const figure of [
		point.t,
		point.f,
		point.v,
		point.r,
		point.e,
		point.k ? point.k.charCodeAt(0) + point.k.length : 0
	]) {
		hash ^= figure | 0;
		hash = Math.imul(hash, 0x01000193) >>> 0;
	}
	return hash;
}

/** The sum of a line number among the last taken in; null when it is not remembered. */
export function recentSum(boot: BootState, n: number): number | null {
	for (let i = boot.recent.length - 2; i >= 0; i -= 2) if (boot.recent[i] === n) return boot.recent[i + 1]!;
	return null;
}

/** Whether event `e` has been taken in before. */
export const hasEvent = (boot: BootState, e: number): boolean => e <= boot.e || boot.eBeyond.includes(e);

export function addEvent(boot: BootState, e: number): void {
	boot.eTop = Math.max(boot.eTop, e);
	if (hasEvent(boot, e)) return;
	boot.eBeyond.push(e);
	boot.eBeyond.sort((a, b) => a - b);
	closeEvents(boot);
	// So many events beyond one gap: the gap will not be filled any more.
	if (boot.eBeyond.length > eBeyondMax) loseEvents(boot);
}

function closeEvents(boot: BootState): void {
	while (boot.eBeyond[0] === boot.e + 1) {
		boot.e += 1;
		boot.eBeyond.shift();
	}
}

/** The device has the events of the first gap no more. Returns how many are lost. */
export function loseEvents(boot: BootState): number {
	const upTo = boot.eBeyond.length > 0 ? boot.eBeyond[0]! - 1 : boot.eTop;
	const lost = upTo - boot.e;
	if (lost <= 0) return 0;
	boot.e = upTo;
	closeEvents(boot);
	return lost;
}

export const hasEventGap = (boot: BootState): boolean => boot.e < boot.eTop;

/** Learns from a line how device time lies to wall time. */
export function learnOffset(boot: BootState, t: number, receivedAt: number, timeScale: number): void {
	const offset = receivedAt - t / timeScale;
	boot.offsetLast = offset;
	const slice = Math.floor(receivedAt / offsetSliceMs);
	const last = boot.offsets[boot.offsets.length - 1];
	if (last && last[0] === slice) boot.offsets[boot.offsets.length - 1] = [slice, Math.min(last[1], offset)];
	else boot.offsets.push([slice, offset]);
	const oldest = Math.floor((receivedAt - offsetWindowMs) / offsetSliceMs);
	while (boot.offsets.length > 1 && boot.offsets[0]![0] < oldest) boot.offsets.shift();
}

/** Wall ms at device time 0, by the smallest delay of the last minute. */
export function offsetOf(boot: BootState): number {
	if (boot.offsets.length === 0) return boot.birthAt;
	return Math.min(...boot.offsets.map((pair) => pair[1]));
}

/** Wall ms of a moment of the device. */
export const wallAt = (boot: BootState, t: number, timeScale: number): number => offsetOf(boot) + t / timeScale;

/** Device ms of a wall moment. */
export const deviceTimeAt = (boot: BootState, wall: number, timeScale: number): number =>
	(wall - offsetOf(boot)) * timeScale;

/** A time axis common to all boots of a winder, in device milliseconds: durations across a restart are right on it. */
export const axisAt = (boot: BootState, t: number, timeScale: number): number => boot.birthAt * timeScale + t;
