import type { DeviceLine } from '../turnline/types.ts';
import { commands, newWinder, passTime, takeCoil, takeLine, takeTap, viewOf, type TapAnswer } from './winder.ts';
import type { CoilPlan, Fact, FactKind, LiveView, TapKind, WinderConfig } from './types.ts';

/**
 * For tests: a winder whose spindle is turned by hand-written steps, with its lines going straight into the fold, or held
 * back and handed over later. Wall time and device time run together.
 */
export const config: WinderConfig = {
	pulsesPerTurn: 1,
	rpmMax: 1200,
	seesDirection: true,
	forwardIs: 'counter-clockwise',
	easeEarlyTurns: 40,
	stopEarlyTurns: 3,
	timeScale: 1,
	keepAfterMs: null
};

export const plan: CoilPlan = {
	coilId: 'coil-1',
	name: 'Trial coil',
	note: '',
	target: 1200,
	lookEvery: 500,
	direction: 'counter-clockwise',
	topFaces: 'out',
	toleranceTurns: 5,
	firstLook: null,
	fullTurns: null
};

const startAt = 1_764_000_000_000;

export class Bench {
	state = newWinder();
	facts: Fact[] = [];
	now = startAt;
	bornAt = startAt;
	b = '5C0E91A7';
	n = 0;
	e = 0;
	f = 0;
	v = 0;
	r = 0;
	turning = false;
	/** While true lines wait in `held` instead of coming in. */
	down = false;
	held: DeviceLine[] = [];
	private tapCount = 0;
	config: WinderConfig;

	constructor(changes: Partial<WinderConfig> = {}) {
		this.config = { ...config, ...changes };
	}

	get t(): number {
		return Math.round((this.now - this.bornAt) * this.config.timeScale);
	}

	get view(): Pick<LiveView, 'run' | 'notices' | 'link' | 'net' | 'boot' | 'last' | 'turning'> {
		return viewOf(this.state, this.config, this.now);
	}

	get run() {
		return this.view.run!;
	}

	kinds(): FactKind[] {
		return this.facts.map((fact) => fact.kind);
	}

	count(kind: FactKind): number {
		return this.facts.filter((fact) => fact.kind === kind).length;
	}

	give(line: DeviceLine): ReturnType<typeof takeLine> {
		const step = takeLine(this.state, this.config, line, this.now);
		this.state = step.state;
		this.facts.push(...step.facts);
		return step;
	}

	private send(line: DeviceLine): void {
		if (this.down) this.held.push(line);
		else this.give(line);
	}

	hi(more: object = {}): void {
		this.send({
			verb: 'HI',
			p: 1,
			dev: 'w-01',
			b: this.b,
			n: this.n,
			e: this.e,
			f: this.f,
			v: this.v,
			t: this.t,
			...more
		});
	}

	tick(more: object = {}): void {
		this.n += 1;
		this.send({ verb: 'T', b: this.b, n: this.n, e: this.e, f: this.f, v: this.v, r: this.r, t: this.t, ...more });
	}

	event(k: string): void {
		this.n += 1;
		this.e += 1;
		this.send({ verb: 'E', b: this.b, n: this.n, e: this.e, f: this.f, v: this.v, t: this.t, k });
	}

	wait(ms: number): void {
		this.now += ms;
		this.pass();
	}

	pass(): void {
		const step = passTime(this.state, this.config, this.now);
		this.state = step.state;
		this.facts.push(...step.facts);
	}

	/** Turns at a speed with a tick after each few turns, coasting down at the end. Negative turns go backwards. */
	turn(turns: number, rpm = 600, coast = true): void {
		const way = Math.sign(turns);
		let left = Math.abs(turns);
		if (!this.turning) {
			this.turning = true;
			this.event('go');
		}
		while (left > 0) {
			const speed = coast && left <= 4 ? Math.max(60, (rpm * left) / 5) : rpm;
			this.now += Math.round(60_000 / speed);
			if (way > 0 || !this.config.seesDirection) this.f += 1;
			else this.v += 1;
			left -= 1;
			this.r = Math.round(way * speed);
			if (!this.config.seesDirection) this.r = Math.abs(this.r);
			this.tick();
		}
		this.pass();
	}

	/** Stands still: no pulse for a while, then the stop event. */
	stand(ms = 1_000): void {
		this.now += 500;
		this.r = 0;
		this.turning = false;
		this.event('stop');
		for (let passed = 0; passed < ms; passed += 1_000) {
			this.now += 1_000;
			this.tick();
			this.pass();
		}
	}

	coil(changes: Partial<CoilPlan> = {}, runId = 'run-1'): void {
		const step = takeCoil(this.state, this.config, { runId, plan: { ...plan, ...changes }, sticker: 'K7QF' }, this.now);
		this.state = step.state;
		this.facts.push(...step.facts);
	}

	tap(tap: TapKind, id = `tap-${(this.tapCount += 1)}`, madeAt = this.now): TapAnswer {
		const step = takeTap(this.state, this.config, { ...tap, id, memberId: 'member-1' }, madeAt, this.now);
		this.state = step.state;
		this.facts.push(...step.facts);
		return step.answer;
	}

	commands(mode: 'changed' | 'all' = 'all') {
		const step = commands(this.state, this.config, this.now, mode);
		this.state = step.state;
		return step.lines;
	}

	restart(b: string, gapMs = 1_000): void {
		this.now += gapMs;
		this.b = b;
		this.bornAt = this.now;
		this.n = this.e = this.f = this.v = this.r = 0;
		this.turning = false;
	}
}
