import type { DeviceLine } from '../../src/lib/turnline/index.ts';

/** What the bridge has of each boot: as much as it takes to acknowledge, and to ask again for what is missing. */

export interface BootMark {
	b: string;
	/** Greatest line number kept. */
	n: number;
	/** Events 1 to `e` are kept, or known to be gone. */
	e: number;
	/** Kept beyond a gap. */
	ahead: number[];
	/** The last event the winder spoke of. */
	eTop: number;
}

/** A winder that restarts for minutes on end must not fill the memory; old ones are done with long before. */
const bootsMax = 32;
/** Events remembered beyond a gap; a ring holds no more than a few hundred lines. */
const aheadMax = 1_024;

export class Boots {
	/** The newest last. */
	#boots: BootMark[];

	constructor(known: readonly BootMark[] = []) {
		this.#boots = known.map((boot) => ({ ...boot, ahead: [...boot.ahead] }));
	}

	get marks(): readonly BootMark[] {
		return this.#boots;
	}

	of(b: string): BootMark | null {
		return this.#boots.find((boot) => boot.b === b) ?? null;
	}

	/** An event that is kept already. */
	hasEvent(b: string, e: number): boolean {
		const boot = this.of(b);
		return boot !== null && (e <= boot.e || boot.ahead.includes(e));
	}

	/** A line that is kept now. */
	keep(line: DeviceLine): void {
		if (line.verb !== 'T' && line.verb !== 'E' && line.verb !== 'HI') return;
		const boot = this.#enter(line.b);
		boot.n = Math.max(boot.n, line.verb === 'HI' ? 0 : line.n);
		boot.eTop = Math.max(boot.eTop, line.e);
		if (line.verb !== 'E' || this.hasEvent(line.b, line.e)) return;
		boot.ahead.push(line.e);
		boot.ahead.sort((one, other) => one - other);
		if (boot.ahead.length > aheadMax) this.gone(line.b);
		else close(boot);
	}

	/** The winder has the missing events no more: what follows is acknowledged without them. */
	gone(b: string): void {
		const boot = this.of(b);
		if (!boot) return;
		boot.e = boot.ahead.length > 0 ? boot.ahead[0]! - 1 : boot.eTop;
		close(boot);
	}

	/** The host itself has them: up to `e` none is missing any more. */
	stored(b: string, n: number, e: number): void {
		const boot = this.of(b);
		if (!boot) return;
		boot.n = Math.max(boot.n, n);
		boot.e = Math.max(boot.e, e);
		boot.ahead = boot.ahead.filter((ahead) => ahead > boot.e);
		close(boot);
	}

	#enter(b: string): BootMark {
		const known = this.of(b);
		if (known) return known;
		const boot: BootMark = { b, n: 0, e: 0, ahead: [], eTop: 0 };
		this.#boots.push(boot);
		if (this.#boots.length > bootsMax) this.#boots.shift();
		return boot;
	}
}

export const hasGap = (boot: BootMark): boolean => boot.e < boot.eTop;

function close(boot: BootMark): void {
	while (boot.ahead[0] === boot.e + 1) {
		boot.e += 1;
		boot.ahead.shift();
	}
}

/** What stands in a file may be of another version: then nothing is known, and the winder is asked. */
export function readMarks(value: unknown): BootMark[] {
	if (!Array.isArray(value)) return [];
	const count = (n: unknown) => Number.isInteger(n) && (n as number) >= 0;
	return value.filter((mark): mark is BootMark => {
		const { b, n, e, eTop, ahead } = (mark ?? {}) as Partial<BootMark>;
		return typeof b === 'string' && count(n) && count(e) && count(eTop) && Array.isArray(ahead) && ahead.every(count);
	});
}
