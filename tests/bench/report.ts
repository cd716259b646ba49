import { figure, median, percentile } from './statistics.ts';
import { markdownTable } from './table.ts';

export interface LatencyFigures {
	winders: number;
	way: string;
	lines: number;
	p50Ms: number;
	p99Ms: number;
	/** Its p99 over that of the way it is compared with; null: it is not compared. */
	ratio: number | null;
	/** The same of each round. */
	ratios: number[];
	aim: number;
}

export interface DurableFigures {
	linesPerS: number;
	plainLinesPerS: number;
	ratio: number;
	ratios: number[];
	lines: number;
	rounds: number;
	aim: number;
}

export interface MemoryFigures {
	heapBytes: number;
	rssBytes: number;
	relayHeapBytes: number;
	relayRssBytes: number;
	from: number;
	to: number;
	aimBytes: number;
	stalled: { sentBytes: number; heapBytes: number; rssBytes: number };
}

export interface InductanceFigures {
	/** Milliseconds of each round. */
	inductance: number[];
	prediction: number[];
	plain: number[];
	/** Terms of the plain sum. */
	pairs: number;
	rounds: number;
	aimMs: number;
}

/** What was measured, as Markdown. */
export class Report {
	readonly #parts: string[] = [];
	readonly #notes: string[] = [];
	readonly #latency: LatencyFigures[] = [];
	readonly #onProgress: (text: string) => void;

	constructor(onProgress: (text: string) => void) {
		this.#onProgress = onProgress;
	}

	/** Progress, for whoever waits. */
	say(text: string): void {
		this.#onProgress(text);
	}

	/** A sentence under the tables. */
	note(text: string): void {
		this.#notes.push(text);
	}

	latency(figures: LatencyFigures): void {
		this.#latency.push(figures);
	}

	durable({ linesPerS, plainLinesPerS, ratio, ratios, lines, rounds, aim }: DurableFigures): void {
		this.#parts.push(
			`Lines a second on disk before they are answered, HTTP batches of 500, ${figure(lines)} lines a round, medians of ${rounds} rounds:`,
			markdownTable(
				['way', 'lines/s', 'of plain insert', 'rounds', 'aim'],
				[
					['plain `unnest` insert of the same rows', figure(plainLinesPerS), '', '', ''],
					['Turnstead', figure(linesPerS), figure(ratio), span(ratios), `≥ ${aim} ${kept(ratio >= aim)}`]
				]
			)
		);
	}

	memory({ heapBytes, rssBytes, relayHeapBytes, relayRssBytes, from, to, aimBytes, stalled }: MemoryFigures): void {
		const kilobytes = (bytes: number) => figure(bytes / 1000);
		this.#parts.push(
			`Memory of one winder on a WebSocket with one screen, after collecting garbage, from the difference between ${from} and ${to} of them:`,
			markdownTable(
				['program', 'heap kB', 'RSS kB', 'aim kB'],
				[
					['relay', kilobytes(relayHeapBytes), kilobytes(relayRssBytes), ''],
					[
						'Turnstead',
						kilobytes(heapBytes),
						kilobytes(rssBytes),
						`≤ ${aimBytes / 1000} ${kept(heapBytes <= aimBytes)}`
					]
				]
			),
			`A screen that stopped reading while ${figure(stalled.sentBytes / 1e6)} MB were published to it: heap ${signed(stalled.heapBytes)} kB, RSS ${signed(stalled.rssBytes)} kB.`
		);
	}

	exit({ took, winders }: { took: number[]; winders: number }): void {
		this.#parts.push(
			`SIGTERM to exit with ${winders} links and ${winders} streams open: ${figure(median(took))} ms` +
				(took.length > 1 ? ` (median of ${took.length}, ${span(took)}).` : '.')
		);
	}

	inductance({ inductance, prediction, plain, pairs, rounds, aimMs }: InductanceFigures): void {
		const reference = median(plain);
		const row = (way: string, ms: readonly number[], aim: boolean) => [
			way,
			figure(median(ms)),
			figure(percentile(ms, 0.95)),
			figure(median(ms) / reference),
			aim ? `≤ ${aimMs} ms ${kept(percentile(ms, 0.95) <= aimMs)}` : ''
		];
		this.#parts.push(
			`What a slider waits for, a pickup of two coils, ${rounds} rounds each at other turns:`,
			markdownTable(
				['work', 'p50 ms', 'p95 ms', 'of plain sum', 'aim'],
				[
					row(
						`one pair of filaments as a plain double sum of ${figure(pairs).replace(/\.\d+$/, '')} terms`,
						plain,
						false
					),
					row('inductance of both coils and between them', inductance, true),
					row('the whole prediction with every uncertainty', prediction, true)
				]
			)
		);
	}

	markdown(machine: string): string {
		const latency =
			this.#latency.length === 0
				? []
				: [
						'Line to screen event, ten lines a second of each winder and a screen each:',
						markdownTable(
							['way', 'winders', 'lines', 'p50 ms', 'p99 ms', 'p99 over relay', 'rounds', 'aim'],
							this.#latency.map((row) => [
								row.way,
								String(row.winders),
								figure(row.lines).replace(/\.\d+$/, ''),
								figure(row.p50Ms),
								figure(row.p99Ms),
								row.ratio === null ? '' : figure(row.ratio),
								span(row.ratios),
								row.ratio === null ? '' : `≤ ${row.aim} ${kept(row.ratio <= row.aim)}`
							])
						)
					];
		return [machine, ...latency, ...this.#parts, ...this.#notes].join('\n\n');
	}
}

const kept = (met: boolean): string => (met ? 'met' : 'missed');

const signed = (bytes: number): string => `${bytes < 0 ? '−' : '+'}${figure(Math.abs(bytes) / 1000)}`;

function span(values: readonly number[]): string {
	if (values.length === 0) return '';
	return `${figure(Math.min(...values))}–${figure(Math.max(...values))}`;
}
