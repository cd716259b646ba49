import type { Locator, Page } from '@playwright/test';
import { startSimulation, type Simulation, type SimulationOptions } from '../../simulator/run.ts';
import type { TruthEntry } from '../../simulator/winder.ts';
import { expect } from './fixtures.ts';
import type { TestServer, TestWinder } from './server.ts';

/** The bench screen as a maker reads it. */
export class BenchPage {
	/** The count, as text with its thousands parted. */
	readonly count: Locator;
	/** The state in one word, large. */
	readonly word: Locator;
	/** What is left, or how old the count is, beside the word. */
	readonly beside: Locator;
	readonly keep: Locator;
	readonly undo: Locator;

	constructor(readonly page: Page) {
		this.count = page.locator('[data-tier="count"]');
		this.word = page.locator('[data-tier="far"]').first();
		this.beside = page.locator('[data-tier="far"]').nth(1);
		this.keep = this.tap('Keep this coil');
		this.undo = this.tap('Undo');
	}

	tap(name: string | RegExp): Locator {
		return this.page.getByRole('button', { name, exact: typeof name === 'string' });
	}

	/** A remark or sentence anywhere on the screen. */
	says(text: string | RegExp): Locator {
		return this.page.getByRole('main').getByText(text).first();
	}

	/** Taps until it is taken: a touch close after another one counts as its trembling. */
	async press(name: string, shown: Locator): Promise<void> {
		await expect(async () => {
			if (!(await shown.isVisible())) await this.tap(name).click({ timeout: 2_000 });
			await expect(shown).toBeVisible({ timeout: 2_000 });
		}).toPass();
	}

	async open(server: Pick<TestServer, 'url'>, winder: TestWinder): Promise<this> {
		await this.page.goto(`${server.url}/bench/${winder.id}`);
		return this;
	}

	/** Every state word this page shows from now on. */
	async noteWords(): Promise<() => Promise<string[]>> {
		await this.word.evaluate((element) => {
			const words: string[] = [];
			const note = () => words.push(element.textContent?.trim() ?? '');
			note();
			new MutationObserver(note).observe(element, { childList: true, characterData: true, subtree: true });
			Reflect.set(window, 'wordsSeen', words);
		});
		return async () => [...new Set(await this.page.evaluate(() => Reflect.get(window, 'wordsSeen') as string[]))];
	}
}

export type Truth = (TruthEntry & { at: number })[];

/** Waits in the simulated maker's own time that only end when the test says go on. */
const untilTold = [1e12, 1e12] as const;

/**
 * One simulated winder whose maker takes as long for each look and each beginning as the test wants: `goOn` ends the wait.
 */
export function simulate(
	server: Pick<TestServer, 'url'>,
	winder: TestWinder,
	options: Partial<SimulationOptions> & { speedUp: number }
) {
	const truth: Truth = [];
	const problems: string[] = [];
	const simulation: Simulation = startSimulation({
		server: server.url,
		winders: [{ winder: winder.id, linkKey: winder.linkKey, name: winder.name }],
		scenario: 'workshop',
		seed: 11,
		truth: (entry) => truth.push(entry),
		tell: (text, problem) => problem && problems.push(text),
		...options,
		// Rocked on the sensor's edge a spindle may end a look one turn further than it began it.
		maker: { firstStartMs: untilTold, startMs: untilTold, lookMs: untilTold, rockChance: 0, ...options.maker }
	});
	const sim = simulation.winders[0]!;
	const of = (kind: TruthEntry['kind']) => truth.filter((entry) => entry.kind === kind);
	return {
		simulation,
		problems,
		/** Turns of the coil as the winder counted them at each of its looks. */
		looks: () => of('look').map(({ turns }) => turns),
		/** Turns of each coil when its maker was done with it. */
		reached: () => of('reached').map(({ turns }) => turns),
		device: sim.device,
		/** The maker waits at the bench, and goes on. */
		async goOn(phase: 'preparing' | 'looking'): Promise<void> {
			await expect.poll(() => sim.maker.phase).toBe(phase);
			sim.maker.goOn();
		}
	};
}
