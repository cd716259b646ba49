import AxeBuilder from '@axe-core/playwright';
import type { Page } from '@playwright/test';
import { expect } from './fixtures.ts';

/** Everything WCAG 2.2 asks at levels A and AA that can be found by looking at the page as it stands. */
const tags = ['wcag2a', 'wcag2aa', 'wcag21a', 'wcag21aa', 'wcag22aa'];

export async function accessible(page: Page, state: string): Promise<void> {
	const { violations } = await new AxeBuilder({ page }).withTags(tags).analyze();
	const found = violations.map(({ id, help, nodes }) => ({
		id,
		help,
		at: nodes.map(({ target }) => target.join(' '))
	}));
	expect(found, state).toEqual([]);
}
