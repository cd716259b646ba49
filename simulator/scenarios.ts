import { noFaults, type FaultTraits } from './faults.ts';
import { calmMaker, type MakerTraits } from './maker.ts';
import type { Mishap } from './winder.ts';

/** What is played: how the maker is, what goes wrong, how bad the link is, and when it is over. */
export interface Scenario {
	/** One line for `--help`. */
	says: string;
	maker: MakerTraits;
	mishap: Mishap | null;
	faults: FaultTraits;
	/** Coils until the end; null: goes on until it is told to stop. */
	coils: number | null;
	/** Chances of the sensor that a good one does not have. */
	bounceChance: number;
}

const busyMaker: MakerTraits = { ...calmMaker, startMs: [8000, 12_000], takeBackChance: 0.15 };

function scenario(says: string, changes: Partial<Scenario>): Scenario {
	return { says, maker: calmMaker, mishap: null, faults: noFaults, coils: 1, bounceChance: 0, ...changes };
}

export const scenarios = {
	workshop: scenario('a calm maker winds whatever the bench has, for as long as it runs', { coils: null }),
	'first-coil': scenario('one coil, nothing goes wrong', {}),
	'set-of-four': scenario('four coils; now and then turns are taken back at a look', { maker: busyMaker, coils: 4 }),
	'bad-link': scenario(
		'two coils over a link that drops, doubles, reorders, spoils and delays lines, and is gone for a while',
		{
			maker: busyMaker,
			coils: 2,
			faults: {
				drop: 0.05,
				double: 0.05,
				reorder: 0.05,
				corrupt: 0.02,
				delayMs: 200,
				outages: [{ fromS: 20, forS: 15 }]
			},
			bounceChance: 0.01
		}
	),
	'restart-mid-coil': scenario('the microcontroller loses its supply in the middle of the coil (see --retain)', {
		mishap: 'restart'
	}),
	'snapped-wire': scenario('the wire snaps in the middle of the coil and the spindle runs on empty for a moment', {
		mishap: 'snap'
	}),
	// Faster than that, ticks are so far apart in the winder's own time that nobody could tell a coast-down from its absence.
	'magnet-fell-off': scenario(
		'the magnet of the sensor falls off at speed; the maker fits it again (to see it, speed-up at most 5)',
		{
			mishap: 'magnet'
		}
	)
} satisfies Record<string, Scenario>;

export type ScenarioName = keyof typeof scenarios;

export const scenarioNames = Object.keys(scenarios) as ScenarioName[];
