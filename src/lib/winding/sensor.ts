import type { Event, Hi, Tick } from '../turnline/types.ts';
import type { BootState, Point } from './boot.ts';
import { pulsesOff, pulseSpeedsMin, pulseWindowMs } from './plausible.ts';
import { type Draft, sayFault, notice } from './state.ts';

/** What the lines tell of the sensor and the device's clock. */

export function checkSensor(d: Draft, boot: BootState, line: Hi | Tick | Event, receivedAt: number): void {
	if (line.verb === 'HI') return;
	if (line.x !== undefined) {
		if (!d.s.bounce || receivedAt - d.s.bounce.at > 10_000 || line.x < d.s.bounce.x) {
			d.s.bounce = { x: line.x, at: receivedAt };
		} else if (line.x - d.s.bounce.x >= 5) {
			d.s.bounce = { x: line.x, at: receivedAt };
			if (notice(d, 'bouncing')) sayFault(d, 'bouncing', receivedAt, { refused: line.x });
		}
		boot.x = Math.max(boot.x, line.x);
	}
	if (line.g !== undefined && line.g > boot.g) {
		const missed = line.g - boot.g;
		boot.g = line.g;
		notice(d, 'missed-pulses');
		sayFault(d, 'missed-pulses', receivedAt, { missed });
	}
}

/** Both clocks over at least ten seconds without a gap: more than a tenth apart and speeds cannot be trusted. */
export function checkClock(d: Draft, boot: BootState, t: number, receivedAt: number, gapMs: number): void {
	if (!d.s.clock || gapMs > 3_000) {
		d.s.clock = { t, at: receivedAt };
		return;
	}
	const wallMs = receivedAt - d.s.clock.at;
	if (wallMs < 15_000) return;
	const ratio = (t - d.s.clock.t) / d.config.timeScale / wallMs;
	if (ratio < 0.9 || ratio > 1.1) {
		// The smallest delay of a minute means nothing on a clock that drifts away: the latest one is nearer.
		boot.offsets = [[Math.floor(receivedAt / 5_000), boot.offsetLast]];
		if (notice(d, 'clock-odd')) sayFault(d, 'clock-odd', receivedAt, { ratio: Math.round(ratio * 100) / 100 });
	}
	d.s.clock = { t, at: receivedAt };
}

export function checkPulses(d: Draft, boot: BootState, point: Point): void {
	const turns = boot.f + boot.v;
	const window = d.s.pulse;
	if (!boot.turning || point.r === 0 || boot.held) {
		d.s.pulse = null;
		return;
	}
	if (!window) {
		d.s.pulse = { t: point.t, turns, rpmSum: 0, rpmCount: 0 };
		return;
	}
	const rpm = Math.abs(point.r);
	const next = { ...window, rpmSum: window.rpmSum + rpm, rpmCount: window.rpmCount + 1 };
	d.s.pulse = next;
	// Speeding up or slowing down says nothing about pulses.
	const mean = next.rpmSum / next.rpmCount;
	if (next.rpmCount > 2 && Math.abs(rpm - mean) > mean * 0.25) d.s.pulse = null;
	else if (point.t - next.t >= pulseWindowMs && next.rpmCount >= pulseSpeedsMin) {
		const factor = pulsesOff(next, point.t, turns);
		d.s.pulse = { t: point.t, turns, rpmSum: 0, rpmCount: 0 };
		if (factor !== null) {
			notice(d, 'pulses-per-turn');
			const run = d.s.run;
			if (run && !run.said.ppr) {
				run.said.ppr = true;
				sayFault(d, 'pulses-per-turn', d.now, { factor });
			}
		}
	}
}
