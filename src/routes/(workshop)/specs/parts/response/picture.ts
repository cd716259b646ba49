import type { Look } from '$lib/spec/response-chart';
import { drawResponse, fontFamily, token } from './draw';

const widthPx = 1200;
const chartHeightPx = 600;
const marginPx = 40;
/** Twice as fine as it is large: sharp on paper as wide as a page. */
const ratio = 2;

/** The chart on paper ground with its title above and the words below it; null where the browser makes none. */
export async function responsePicture(look: Look, title: string, words: readonly string[]): Promise<Blob | null> {
	const chartCanvas = document.createElement('canvas');
	chartCanvas.width = widthPx - 2 * marginPx;
	chartCanvas.height = chartHeightPx;
	const drawn = await drawResponse(chartCanvas, look, { ratio });
	try {
		const lineHeight = 26;
		const heightPx = marginPx + 44 + chartHeightPx + 16 + words.length * lineHeight + marginPx;
		const canvas = document.createElement('canvas');
		canvas.width = widthPx * ratio;
		canvas.height = heightPx * ratio;
		const ctx = canvas.getContext('2d');
		if (!ctx) return null;
		ctx.scale(ratio, ratio);
		ctx.fillStyle = token('paper');
		ctx.fillRect(0, 0, widthPx, heightPx);
		ctx.fillStyle = token('ink');
		ctx.font = `700 28px ${fontFamily()}`;
		ctx.fillText(title, marginPx, marginPx + 22, widthPx - 2 * marginPx);
		ctx.drawImage(chartCanvas, marginPx, marginPx + 44, widthPx - 2 * marginPx, chartHeightPx);
		ctx.fillStyle = token('muted');
		ctx.font = `18px ${fontFamily()}`;
		words.forEach((line, i) => {
			const y = marginPx + 44 + chartHeightPx + 16 + (i + 1) * lineHeight - 6;
			ctx.fillText(line, marginPx, y, widthPx - 2 * marginPx);
		});
		return await new Promise((resolve) => canvas.toBlob(resolve, 'image/png'));
	} finally {
		drawn.destroy();
	}
}

/** Hands a file to the browser to keep. */
export function saveFile(blob: Blob, name: string): void {
	const address = URL.createObjectURL(blob);
	const link = document.createElement('a');
	link.href = address;
	link.download = name;
	document.body.append(link);
	link.click();
	link.remove();
	// Some browsers read it only after the click has been dealt with.
	setTimeout(() => URL.revokeObjectURL(address), 10_000);
}
