import type { Calibration } from '$lib/coil/calibrate';
import type { Prediction } from '$lib/coil/predict';
import type { Result } from '$lib/coil/refuse';
import type { UnitPreference } from '$lib/coil/units';
import type { SpecContent, SpecWire } from '$lib/spec/content';
import { figureRows, type FigureRow } from '$lib/spec/figures';
import { calibrationOf, type KeptReading, type KeptSay } from '$lib/spec/kept';
import { predictSpec } from '$lib/spec/model';
import type { EditorData } from '../editor.server';

interface Of {
	content: SpecContent;
	spools: EditorData['spools'];
	kept: readonly KeptReading[];
	units: UnitPreference;
}

/** What a spec as it stands will be: reckoned once a change, for everything on the page that shows it. */
export class Outlook {
	/** Kept coils have their say. */
	reckon = $state(true);
	readonly #of: () => Of;

	constructor(of: () => Of) {
		this.#of = of;
	}

	readonly spool = $derived.by(() => {
		const { content, spools } = this.#of();
		return spools.find(({ id }) => id === content.spoolId) ?? null;
	});
	/** The spool's wire in place of the spec's; null: no spool. */
	readonly wire: SpecWire | null = $derived(this.spool?.wire ?? null);
	readonly say: KeptSay = $derived.by(() => calibrationOf(this.#of().content, this.wire, this.#of().kept));
	readonly calibration: Calibration | null = $derived(this.reckon ? this.say.calibration : null);
	readonly prediction: Result<Prediction> = $derived.by(() =>
		predictSpec(this.#of().content, { wire: this.wire, calibration: this.calibration })
	);
	/** The same without the kept coils, to show what they change; null where they change nothing. */
	readonly plain: Result<Prediction> | null = $derived.by(() =>
		this.calibration ? predictSpec(this.#of().content, { wire: this.wire }) : null
	);
	/** Every figure in words; none where there is no prediction. */
	readonly rows: FigureRow[] = $derived.by(() => {
		if (!this.prediction.ok) return [];
		const { content, units } = this.#of();
		return figureRows(content, this.prediction.value, units, this.plain?.ok ? this.plain.value : null, this.wire);
	});
	/** Resistance, room and peak: what is watched while a field is changed. */
	readonly key: { key: string; label: string; text: string; danger: boolean }[] = $derived.by(() => {
		const short: Record<string, string> = { resistance: 'At 20 °C', room: 'Room', peak: 'Peak' };
		return this.rows
			.filter(({ key }) => key in short)
			.map(({ key, value, plusMinus, danger }) => ({
				key,
				label: short[key]!,
				text: plusMinus === null ? value : `${value} ${plusMinus}`,
				danger
			}));
	});
}
