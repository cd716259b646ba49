import type { ChartData, Plugin } from 'chart.js';
import { eNotes } from '$lib/coil/response';
import {
	chartFromHz,
	chartToHz,
	hertzText,
	levelAxisDb,
	levelText,
	peakSpanHz,
	peakSpanText,
	type Look
} from '$lib/spec/response-chart';
import { lineLooks, samplePx } from './lines';

/** The chart of a look on a canvas. Browser only; the library comes when it is asked for. */
export interface Drawn {
	/** Takes a new look, at once and without moving there. */
	show(look: Look): void;
	resize(width?: number, height?: number): void;
	destroy(): void;
}

/** The page's own colours, so that the chart follows them. */
export const token = (name: string): string =>
	getComputedStyle(document.documentElement).getPropertyValue(`--color-${name}`).trim();

export const fontFamily = (): string => getComputedStyle(document.body).fontFamily;

const hertzMarks = [50, 100, 200, 500, 1000, 2000, 5000, 10_000, 20_000];
/** Where there is no room for all. */
const fewHertzMarks = [50, 200, 1000, 5000, 20_000];
const narrowPx = 560;
const markText = (hz: number): string => (hz < 1000 ? String(hz) : `${hz / 1000}k`);

/** @param fixed a size of its own in pixels, drawn this many times finer; else it fills what it stands in */
export async function drawResponse(canvas: HTMLCanvasElement, first: Look, fixed?: { ratio: number }): Promise<Drawn> {
	const [
		{ Chart, LineController, LineElement, PointElement, LinearScale, LogarithmicScale, Legend, Tooltip, Filler },
		{ color }
	] = await Promise.all([import('chart.js'), import('chart.js/helpers')]);
	Chart.register(LineController, LineElement, PointElement, LinearScale, LogarithmicScale, Legend, Tooltip, Filler);
	let look = first;
	const font = { family: fontFamily(), size: 14 };
	const ink = token('ink');
	const copper = token('copper');
	const wash = color(copper).alpha(0.16).rgbString();
	const ticks = { font, color: token('muted') };
	const hair = token('hair');
	const title = (text: string) => ({ display: true, text, font, color: ink });

	/** What only frames the curve has no line in the legend and no words of its own. */
	const axes = { xAxisID: 'hertz', yAxisID: 'level' };
	const edge = { ...axes, borderWidth: 0, pointRadius: 0, pointHitRadius: 0, label: '' };
	const dots = (levels: readonly number[]) => levels.map((y, i) => ({ x: look.hertz[i]!, y }));
	const data = (): ChartData<'line', { x: number; y: number }[]> => {
		const { band } = look.curves[0];
		return {
			datasets: [
				...look.curves.map(({ name, levelsDb }, i) => ({
					...axes,
					label: name,
					data: dots(levelsDb),
					borderColor: token(lineLooks[i]!.token),
					borderDash: lineLooks[i]!.dash,
					borderWidth: i === 0 ? 2.5 : 2,
					pointRadius: 0,
					pointHitRadius: 8,
					tension: 0,
					fill: false as const
				})),
				...(band
					? [
							{ ...edge, data: dots(band.leastDb), fill: false as const },
							{ ...edge, data: dots(band.greatestDb), fill: '-1' as const, backgroundColor: wash }
						]
					: [])
			]
		};
	};

	/** The span of the peak: a band between two uprights, with words. */
	const span: Plugin<'line'> = {
		id: 'peakSpan',
		beforeDatasetsDraw({ ctx, chartArea, scales }) {
			const { peak } = look.curves[0];
			const edges = peak && peakSpanHz(peak);
			if (!edges) return;
			const at = (hz: number) =>
				Math.min(chartArea.right, Math.max(chartArea.left, scales['hertz']!.getPixelForValue(hz)));
			const [left, right] = [at(edges.fromHz), at(edges.toHz)];
			ctx.save();
			ctx.fillStyle = wash;
			ctx.fillRect(left, chartArea.top, right - left, chartArea.height);
			ctx.strokeStyle = copper;
			ctx.lineWidth = 1;
			for (const x of [left, right]) {
				ctx.beginPath();
				ctx.moveTo(x, chartArea.top);
				ctx.lineTo(x, chartArea.bottom);
				ctx.stroke();
			}
			ctx.restore();
		},
		afterDatasetsDraw({ ctx, chartArea, scales }) {
			const { peak } = look.curves[0];
			const edges = peak && peakSpanHz(peak);
			if (!edges) return;
			const lines = ['Peak, 19 in 20:', peakSpanText(peak)!];
			ctx.save();
			ctx.font = `14px ${font.family}`;
			const width = Math.max(...lines.map((line) => ctx.measureText(line).width));
			const left = scales['hertz']!.getPixelForValue(edges.fromHz) - 8 - width;
			const right = scales['hertz']!.getPixelForValue(edges.toHz) + 8;
			// Low and left of the band nothing else stands: the curves are flat there, at the top.
			const from = left > chartArea.left ? left : Math.min(right, chartArea.right - width);
			const top = chartArea.bottom - 28;
			ctx.fillStyle = copper;
			lines.forEach((line, i) => ctx.fillText(line, from, top + 18 * i));
			ctx.restore();
		}
	};

	const log = { type: 'logarithmic' as const, min: chartFromHz, max: chartToHz };
	const chart = new Chart<'line', { x: number; y: number }[]>(canvas, {
		type: 'line',
		data: data(),
		plugins: [span],
		options: {
			parsing: false,
			animation: false,
			responsive: !fixed,
			maintainAspectRatio: false,
			...(fixed ? { devicePixelRatio: fixed.ratio } : {}),
			interaction: { mode: 'index', intersect: false },
			plugins: {
				legend: {
					align: 'start',
					// The names stand in the table as well; hiding a curve by its name would leave that one behind.
					onClick: () => undefined,
					labels: { font, color: ink, boxWidth: samplePx, boxHeight: 0, filter: ({ text }) => text !== '' }
				},
				tooltip: {
					titleFont: font,
					bodyFont: font,
					cornerRadius: 2,
					displayColors: false,
					filter: ({ dataset }) => dataset.label !== '',
					callbacks: {
						title: (items) => hertzText(items[0]?.parsed.x ?? 0),
						label: ({ dataset, parsed }) => `${dataset.label}: ${levelText(parsed.y ?? 0)}`
					}
				}
			},
			scales: {
				hertz: {
					...log,
					axis: 'x',
					position: 'bottom',
					title: title('Frequency, Hz (k: thousands)'),
					afterBuildTicks: (axis) => {
						const marks = axis.chart.width < narrowPx ? fewHertzMarks : hertzMarks;
						axis.ticks = marks.map((value) => ({ value }));
					},
					ticks: { ...ticks, maxRotation: 0, autoSkip: false, callback: (value) => markText(Number(value)) },
					grid: { color: hair }
				},
				notes: {
					...log,
					axis: 'x',
					position: 'top',
					title: title('Notes (A4 = 440 Hz)'),
					afterBuildTicks: (axis) => {
						axis.ticks = eNotes.map(({ hz }) => ({ value: hz }));
					},
					ticks: {
						...ticks,
						maxRotation: 0,
						autoSkip: false,
						callback: (value) => eNotes.find(({ hz }) => Math.abs(hz - Number(value)) < 1)?.name ?? ''
					},
					grid: { drawOnChartArea: false, color: token('rule') }
				},
				level: {
					type: 'linear',
					axis: 'y',
					position: 'left',
					...levelAxisDb(look),
					title: title("dB over the strings' voltage"),
					ticks: { ...ticks, stepSize: 10, callback: (value) => levelText(Number(value), 0).replace(' dB', '') },
					grid: { color: hair }
				}
			}
		}
	});

	return {
		show(next) {
			look = next;
			chart.data.datasets = data().datasets;
			Object.assign(chart.options.scales!['level']!, levelAxisDb(look));
			chart.update('none');
		},
		resize: (width, height) => chart.resize(width, height),
		destroy: () => chart.destroy()
	};
}
