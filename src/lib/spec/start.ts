import { genericBobbins } from '../coil/bobbins.ts';
import { cores } from '../coil/inductance.ts';
import { covers, usualCableFPerM, usualLoad } from '../coil/response.ts';
import { packings } from '../coil/winding.ts';
import { wireSizes } from '../coil/wire.ts';
import type { SpecCoil, SpecContent, SpecKind, SpecWire } from './content.ts';

/** Where a new spec starts. Generic figures from memory, every one to be edited. */

/** What a kind of pickup usually is made of. Common practice, no source. */
const usual: Record<SpecKind, { bobbin: string; cores: string; magnet: 'bar' | 'rods'; coils: readonly string[] }> = {
	'one-coil': { bobbin: 'flat-tall', cores: 'magnet-rods', magnet: 'rods', coils: ['Coil'] },
	'two-coils': { bobbin: 'two-coil', cores: 'slugs-screws', magnet: 'bar', coils: ['Screw coil', 'Slug coil'] },
	'wide-one-coil': { bobbin: 'wide', cores: 'wide-screws', magnet: 'bar', coils: ['Coil'] },
	other: { bobbin: 'flat-tall', cores: 'air', magnet: 'bar', coils: ['Coil'] }
};

/** A length of guitar cable that comes to about 500 pF (from memory). */
const cableLengthM = 5;

/** A wire of the table in one grade; the first grade of the size where it has no such. */
export function tableWire(
	sizeKey: string,
	grade: SpecWire['grade'],
	material: SpecWire['material'] = 'polyurethane'
): SpecWire {
	const size = wireSizes.find((each) => each.key === sizeKey);
	if (!size) throw new RangeError(`There is no wire size ${sizeKey}.`);
	const taken = size.enamel[grade] ? grade : (Object.keys(size.enamel)[0] as SpecWire['grade']);
	const overall = size.enamel[taken]!;
	return {
		sizeKey,
		diameterM: size.diameterM,
		diameterBasis: 'law',
		grade: taken,
		material,
		overallDiameterM: overall.nomM,
		overallMinM: overall.minM,
		overallMaxM: overall.maxM,
		ohmPerM: null
	};
}

/** The bobbin of a generic one, with its figures as they stand. */
export function genericBobbin(key: string): SpecContent['bobbin'] {
	const generic = genericBobbins.find((each) => each.key === key);
	if (!generic) throw new RangeError(`There is no generic bobbin ${key}.`);
	return { name: generic.name, generic: key, ...generic.bobbin, guideStops: '' };
}

export function startingSpec(kind: SpecKind, name: string): SpecContent {
	const from = usual[kind];
	const generic = genericBobbins.find((each) => each.key === from.bobbin)!;
	const core = cores.find((each) => each.key === from.cores)!;
	// The usual figure is either a way of winding or one between: the nearest gives its width.
	const packing = [...packings].sort(
		(a, b) => Math.abs(a.usual - generic.packing) - Math.abs(b.usual - generic.packing)
	)[0]!;
	const coils = from.coils.map((coilName, i): SpecCoil => ({
		name: coilName,
		turns: generic.turns,
		direction: 'counter-clockwise',
		start: '',
		finish: '',
		toleranceTurns: 5,
		// Alike wound coils over opposite poles, joined finish to finish: in phase, and hum cancels.
		pole: i === 0 ? 'south-up' : 'north-up',
		hot: i === 0 ? 'start' : 'finish'
	}));
	return {
		name,
		kind,
		strings: { spacingM: null, radiusM: null },
		mounting: '',
		bobbin: genericBobbin(from.bobbin),
		wire: tableWire('awg-42', 'single'),
		spoolId: null,
		packing: {
			key: packing.key,
			value: generic.packing,
			halfWidth: (packing.max - packing.min) / 2,
			measured: false
		},
		coils,
		wiring: coils.length === 2 ? 'series' : 'single',
		coilSpacingM: coils.length === 2 ? generic.spacingM : null,
		magnet: { material: 'Alnico 5', shape: from.magnet, charged: '', aged: '' },
		cores: { key: core.key, effectivePermeability: core.usual, measured: false },
		leads: { words: '', lengthM: 0.3 },
		cover: { key: 'none', words: '' },
		potting: '',
		looks: { every: 500, first: 100 },
		load: {
			volumePotOhm: usualLoad.volumePotOhm,
			volumeTaper: 'audio',
			tonePotOhm: usualLoad.tonePotOhm,
			toneTaper: 'audio',
			toneCapF: usualLoad.toneCapF,
			cableLengthM,
			cableFPerM: usualCableFPerM,
			inputOhm: usualLoad.inputOhm,
			coilF: null,
			lossOhm: covers[0]!.lossOhm
		},
		notes: ''
	};
}
