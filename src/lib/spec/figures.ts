import type { Contribution, Prediction } from '../coil/predict.ts';
import { coverage } from '../coil/measurement.ts';
import type { Part, Uncertain } from '../coil/uncertainty.ts';
import { shownValue, wireLengthUnit, type UnitPreference } from '../coil/units.ts';
import { tensionN } from '../coil/wire.ts';
import type { SpecContent, SpecWire } from './content.ts';
import { leadsOhm, specTogether } from './model.ts';
import {
	decibelSpanText,
	decimalText,
	mostWords,
	plusMinus,
	plusMinusOf,
	shares,
	spanText,
	type PlusMinus,
	type Share
} from './words.ts';

/** A prediction as rows of a table: what a maker reads before any wire is spent. */
export interface FigureRow {
	key: string;
	label: string;
	/** "7.5 kΩ": the digits its uncertainty deserves. */
	value: string;
	/** "± 0.7": 19 in 20. null where the figure is a range, exact, or no figure. */
	plusMinus: string | null;
	/** What contributes most, or what belongs beside the figure. */
	remark: string;
	/** Something to be mended: said in `remark`, marked besides. */
	danger: boolean;
	/** One sentence in trade words. */
	explains: string;
	/** What its ± comes from, largest first. */
	shares: Share[];
	/** "Without your kept coils: 7.9 kΩ ± 0.7."; null where they change nothing. */
	plain: string | null;
}

/** Less room than this between copper and flange: tape needs it, and the last turns climb. Common practice, no source. */
export const roomMinM = 0.0005;
/** A part of the resistance that no meter of a workshop tells from its own error (±0.5 % and two counts are usual). */
const nothingPart = 0.001;

/** Room to the flange of one coil, with its standard uncertainty. null without a flange. */
export interface Room {
	m: number;
	uncertaintyM: number;
}

const partOf = (figure: Uncertain<Contribution>, name: Contribution): number =>
	figure.parts.find((part) => part.name === name)?.uncertainty ?? 0;

/** Winding depth goes with the turns, and so does its uncertainty; the core's does not. */
export function roomOf(prediction: Prediction, index: number): Room | null {
	const coil = prediction.coils[index];
	const first = prediction.coils[0];
	if (!coil || !first || coil.roomM === null) return null;
	const { windingDepthM, outerWidthM } = prediction.figures;
	const depth = windingDepthM.uncertainty * (coil.turns / first.turns);
	return { m: coil.roomM, uncertaintyM: Math.hypot(depth, partOf(outerWidthM, 'bobbin') / 2) };
}

/** Room to the flange in a sentence; `danger` where wire would be spent on a coil that does not fit. */
export function roomWords(room: Room, units: UnitPreference): { remark: string; danger: boolean } {
	const said = (m: number) => shownValue(m, 'length', units.length, 2);
	if (room.m < 0)
		return { remark: `does not fit: ${said(-room.m)} too much on each side. Wind fewer turns.`, danger: true };
	if (room.m < roomMinM) return { remark: 'too little for tape: the last turns may climb the flange', danger: true };
	if (room.m < coverage * room.uncertaintyM)
		return { remark: 'may turn out full: look at the edge before the last hundreds of turns', danger: false };
	return { remark: 'on each side, for tape and the last turns', danger: false };
}

/**
 * What the last turn adds, with its uncertainty: resistance goes with the length of the mean turn, this with the outermost,
 * so that what makes the winding deeper weighs on it once more.
 */
function turnAdds(prediction: Prediction, index: number): Uncertain<Contribution> {
	const coil = prediction.coils[index]!;
	const { resistanceOhm, windingDepthM } = prediction.figures;
	const outermostM = coil.meanTurnM + Math.PI * coil.windingDepthM;
	const further = (2 * Math.PI * coil.windingDepthM) / outermostM - (Math.PI * coil.windingDepthM) / coil.meanTurnM;
	const parts = resistanceOhm.parts.map((part): Part<Contribution> => {
		const own = part.uncertainty / resistanceOhm.value;
		const deeper = partOf(windingDepthM, part.name) / windingDepthM.value;
		return { name: part.name, uncertainty: coil.ohmPerTurn * (own + further * deeper) };
	});
	return { value: coil.ohmPerTurn, uncertainty: Math.hypot(...parts.map((part) => part.uncertainty)), parts };
}

/** "3.97 · 3.91 kΩ": one figure of each coil, once where they are alike. */
function eachText(each: readonly PlusMinus[]): { value: string; half: string | null } {
	const [first, second] = each;
	if (!first) throw new RangeError('There is no coil.');
	const alike = !second || second.number === first.number;
	return { value: alike ? first.value : `${first.number} · ${second.value}`, half: first.half };
}

const pm = (half: string | null): string | null => (half === null ? null : `± ${half}`);

const capital = (text: string): string => text.charAt(0).toUpperCase() + text.slice(1);

/** How the coils are joined, in the words of the table. */
const wiringWords: Record<SpecContent['wiring'], string> = {
	series: 'in series',
	parallel: 'in parallel',
	single: 'the first alone'
};

/** Whether hum cancels and the strings' signals add, in words. */
export const togetherWords = ({ humCancelling, inPhase }: { humCancelling: boolean; inPhase: boolean }): string =>
	`${humCancelling ? 'hum-cancelling' : 'not hum-cancelling'}, ${inPhase ? 'in phase' : 'out of phase'}`;

/**
 * Every figure of a prediction as a row.
 *
 * @param plain the same prediction without the kept coils' say, to show what they change; null: there are none
 * @param wire the spool's wire where one is reckoned with
 */
export function figureRows(
	content: SpecContent,
	prediction: Prediction,
	units: UnitPreference,
	plain: Prediction | null = null,
	wire: SpecWire | null = null
): FigureRow[] {
	const { figures, coils } = prediction;
	const two = coils.length === 2;
	const uneven = two && coils[0]!.turns !== coils[1]!.turns;
	const coilName = (i: number) => content.coils[i]?.name ?? `Coil ${i + 1}`;
	const ofFirst = uneven ? `, ${coilName(0)}` : '';
	const wireUnit = wireLengthUnit(units);

	const row = (
		key: string,
		label: string,
		rest: Partial<FigureRow> & { value: string; explains: string }
	): FigureRow => ({
		key,
		label,
		plusMinus: null,
		remark: '',
		danger: false,
		shares: [],
		plain: null,
		...rest
	});
	const ofFigure = (
		key: string,
		label: string,
		figure: Uncertain<Contribution>,
		shown: PlusMinus,
		explains: string,
		rest: Partial<FigureRow> = {}
	): FigureRow =>
		row(key, label, {
			value: shown.value,
			plusMinus: pm(shown.half),
			remark: mostWords(figure),
			shares: shares(figure.parts),
			explains,
			...rest
		});
	/** The sentence that shows what kept coils did, where they did anything that can be seen. */
	const against = (now: string, before: string | undefined): string | null =>
		before === undefined || before === now ? null : `Without your kept coils: ${before}.`;

	// Whoever counts in kilohms still reads some hundred ohms as such.
	const ohmUnit = Math.min(...coils.map((coil) => coil.resistanceOhm)) < 1000 ? 'ohm' : units.resistance;
	const ohm = (value: number, uncertainty: number) => plusMinus(value, uncertainty, 'resistance', ohmUnit);
	const length = (figure: { value: number; uncertainty: number }) =>
		plusMinus(figure.value, figure.uncertainty, 'length', units.length);

	const rows: FigureRow[] = [];

	const whole = (of: Prediction) => ohm(of.figures.resistanceOhm.value, of.figures.resistanceOhm.uncertainty);
	rows.push(
		ofFigure(
			'resistance',
			'Resistance at 20 °C',
			figures.resistanceOhm,
			whole(prediction),
			`What a meter shows at the leads${two ? `, ${wiringWords[content.wiring]}` : ''}: more turns of this wire on this bobbin make the pickup hotter and its resistance higher, and ohms of different pickups compare only then.`,
			{ plain: against(whole(prediction).text, plain ? whole(plain).text : undefined) }
		)
	);

	if (two) {
		const each = (of: Prediction) =>
			eachText(of.coils.map((coil) => ohm(coil.resistanceOhm, coil.resistanceUncertaintyOhm)));
		const now = each(prediction);
		const before = plain ? each(plain) : null;
		const said = ({ value, half }: { value: string; half: string | null }) => (half ? `${value} ± ${half}` : value);
		rows.push(
			row('each', 'Each coil', {
				value: now.value,
				plusMinus: pm(now.half),
				remark: uneven ? `${coilName(0)} · ${coilName(1)}` : 'alike',
				shares: shares(figures.resistanceOhm.parts),
				explains:
					'Each coil measured by itself at 20 °C, before the two are joined: this is what to check as it comes off the winder.',
				plain: against(said(now), before ? said(before) : undefined)
			})
		);
	}

	const adds = (of: Prediction) =>
		eachText(
			of.coils.map((_, i) => {
				const one = turnAdds(of, i);
				return plusMinus(one.value, one.uncertainty, 'resistance', 'ohm');
			})
		);
	const added = turnAdds(prediction, 0);
	const oneMore = adds(prediction);
	rows.push(
		row('turn', 'One more turn adds', {
			value: oneMore.value,
			plusMinus: pm(oneMore.half),
			remark: `200 turns: ${plusMinus(200 * added.value, 200 * added.uncertainty, 'resistance', 'ohm').value}${two ? ' a coil' : ''}`,
			shares: shares(added.parts),
			explains: 'The outermost turn is the longest: what it measures is what the next turn on this coil will add.'
		})
	);

	const mass = plusMinus(figures.copperMassKg.value, figures.copperMassKg.uncertainty, 'mass', units.mass);
	rows.push(
		ofFigure(
			'length',
			'Wire',
			figures.lengthM,
			plusMinus(figures.lengthM.value, figures.lengthM.uncertainty, 'length', wireUnit),
			`All the wire ${two ? 'of both coils' : 'of the coil'}, without what is left over at its ends.`
		),
		ofFigure(
			'mass',
			'Copper',
			figures.copperMassKg,
			mass,
			'What that wire weighs without its enamel: weigh the spool before and after to see it.'
		)
	);

	// The coil with more turns is the one that must fit.
	const larger = uneven && coils[1]!.turns > coils[0]!.turns ? 1 : 0;
	const sizeOf = (i: number) => {
		const coil = coils[i]!;
		const more = 2 * figures.windingDepthM.uncertainty * (coil.turns / coils[0]!.turns);
		const uncertainty = Math.max(
			Math.hypot(more, partOf(figures.outerLengthM, 'bobbin')),
			Math.hypot(more, partOf(figures.outerWidthM, 'bobbin'))
		);
		const width = length({ value: coil.outerWidthM, uncertainty });
		return { text: `${length({ value: coil.outerLengthM, uncertainty }).number} × ${width.value}`, half: width.half };
	};
	const size = sizeOf(larger);
	rows.push(
		row('size', 'Outer size', {
			value: size.text,
			plusMinus: pm(size.half),
			remark: uneven
				? `${coilName(larger)}; ${coilName(1 - larger)} ${sizeOf(1 - larger).text}`
				: mostWords(figures.outerWidthM),
			shares: shares(figures.outerLengthM.parts),
			explains:
				'Length and width over the copper, without tape; measure the width of a wound coil and the packing is known for the next.'
		}),
		ofFigure(
			'depth',
			`Winding depth${ofFirst}`,
			figures.windingDepthM,
			length(figures.windingDepthM),
			'How far the wire stands above the core on each side.'
		)
	);

	const room = roomOf(prediction, larger);
	if (room) {
		const shown = length({ value: room.m, uncertainty: room.uncertaintyM });
		const parts = figures.windingDepthM.parts;
		rows.push(
			row('room', `Room to the flange${uneven ? `, ${coilName(larger)}` : ''}`, {
				value: shown.value,
				plusMinus: pm(shown.half),
				...roomWords(room, units),
				shares: shares(parts),
				explains: `What is left between the copper and the edge of the flange on each side: less than ${shownValue(roomMinM, 'length', units.length, 1)} is too little for tape and the last turns.`
			})
		);
	} else {
		rows.push(
			row('room', 'Room to the flange', {
				value: 'no flange given',
				remark: 'give its width to see whether the coil fits',
				explains: 'Without the width of the flange nothing says how much the bobbin holds.'
			})
		);
	}

	const fill = figures.copperFill;
	rows.push(
		ofFigure(
			'mean-turn',
			`Mean turn${ofFirst}`,
			figures.meanTurnM,
			length(figures.meanTurnM),
			'The average length of one turn: wire divided by turns.'
		),
		ofFigure(
			'fill',
			'Copper fill',
			fill,
			plusMinusOf(100 * fill.value, 100 * fill.uncertainty, '%'),
			'How much of the winding’s cross-section is bare copper; enamel and air are the rest.'
		)
	);

	const henry = (figure: Uncertain<Contribution>) => {
		const unit = figure.value >= 0.1 ? 'henry' : figure.value >= 1e-4 ? 'millihenry' : 'microhenry';
		return plusMinus(figure.value, figure.uncertainty, 'inductance', unit);
	};
	const iron = content.cores.effectivePermeability !== 1;
	rows.push(
		ofFigure(
			'inductance',
			iron ? 'Inductance with its cores' : 'Inductance',
			figures.inductanceH,
			henry(figures.inductanceH),
			'What an inductance meter shows at the leads with cores and magnet in place; with the capacitances it sets where the pickup resonates.',
			iron && !content.cores.measured
				? { remark: `${mostWords(figures.inductanceH)}; measure one coil to know it better` }
				: {}
		)
	);
	if (iron) {
		rows.push(
			ofFigure(
				'air-inductance',
				'Inductance without iron',
				figures.airInductanceH,
				henry(figures.airInductanceH),
				'The winding alone, before cores and magnet go in: measured then, it shows shorted turns that ohms hide.'
			)
		);
	}

	const { load } = content;
	const cableF = load.cableLengthM * load.cableFPerM;
	const pots = [
		`${shownValue(load.volumePotOhm, 'resistance', 'kilohm', 3)} volume`,
		...(load.tonePotOhm === null ? [] : [`${shownValue(load.tonePotOhm, 'resistance', 'kilohm', 3)} tone`]),
		`${shownValue(cableF, 'capacitance', 'picofarad', 3)} cable`
	].join(', ');
	const { peakHz, peakDb } = prediction;
	const explainsPeak =
		'Where the pickup rings loudest into these pots and this cable: higher is brighter, lower is darker';
	if (peakHz && peakDb) {
		const unit = peakHz.value >= 1000 ? 'kilohertz' : 'hertz';
		rows.push(
			row('peak', 'Peak into this load', {
				value: spanText(peakHz.value, peakHz.uncertainty, 'frequency', unit),
				remark: pots,
				shares: shares(peakHz.parts),
				explains: `${explainsPeak}; 19 of 20 such pickups lie in this range.`
			}),
			row('peak-height', 'Height of the peak', {
				value: decibelSpanText(peakDb.value, peakDb.uncertainty),
				remark: mostWords(peakDb),
				shares: shares(peakDb.parts),
				explains:
					'How far the peak stands above the string’s own level, as a range: the higher, the more it rings; covers and lower pots flatten it.'
			})
		);
	} else {
		rows.push(
			row('peak', 'Peak into this load', {
				value: 'none',
				remark: pots,
				explains: `${explainsPeak}; into this load it falls off without one.`
			})
		);
	}

	const tension = tensionN((wire ?? content.wire).diameterM);
	const forceUnit = units.mass === 'ounce' ? 'poundForce' : 'gramForce';
	const force = (newton: number) => shownValue(newton, 'force', forceUnit, 2);
	rows.push(
		row('tension', 'Greatest tension', {
			value: tension ? force(tension.maxN) : 'no chart for this size',
			remark: tension ? `wind with ${force(tension.fromN)} to ${force(tension.toN)}` : 'ask whoever made the wire',
			explains: tension
				? `The most this wire should be pulled with, by a wire maker’s chart (${shownValue(tension.maxN, 'force', 'newton', 2)}); half to four fifths of it keeps the wire from stretching, which would thin it and raise the ohms.`
				: 'The chart of greatest recommended tensions goes from AWG 40 to 44 only.'
		})
	);

	const leads = leadsOhm(content);
	const part = leads / figures.resistanceOhm.value;
	rows.push(
		row('leads', 'Leads', {
			value: leads > 0 ? shownValue(leads, 'resistance', 'ohm', 2) : 'none given',
			remark:
				leads === 0
					? ''
					: part < nothingPart
						? 'nothing a meter shows'
						: `${decimalText(100 * part, part < 0.1 ? 1 : 0)} % more`,
			explains:
				'What the pickup’s own leads add, there and back, reckoned as 28 AWG, the thinnest in use; it is not in the resistance above.'
		})
	);

	const how = specTogether(content);
	if (how) {
		rows.push(
			row('together', 'The two coils', {
				value: capital(togetherWords(how)),
				remark: wiringWords[content.wiring],
				explains:
					'Follows from which way the wire goes on, which pole faces the strings and which lead is hot, of each coil.'
			})
		);
	}
	return rows;
}
