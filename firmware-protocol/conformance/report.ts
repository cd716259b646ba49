import type { Level, Verdict } from './rules.ts';
import { entryText, type Session } from './session.ts';

/** Verdicts in plain words. */

const marks = { pass: 'pass', fail: 'FAIL', 'not-shown': 'not shown', 'not-asked': 'not asked' };

/** Whether every rule that the level asks for was seen and kept. */
export function isProved(verdicts: readonly Verdict[]): boolean {
	return verdicts.every(({ result }) => result === 'pass' || result === 'not-asked');
}

export function reportText(session: Session, verdicts: readonly Verdict[], level: Level): string {
	const rows = verdicts.map(({ id, says, result, why, lines }) => {
		const where = lines.length === 0 ? '' : ` (line${lines.length > 1 ? 's' : ''} ${lines.join(', ')})`;
		const row = `${marks[result].padEnd(10)}${id.padEnd(18)}${says}${result === 'pass' ? where : ''}`;
		if (result === 'pass') return row;
		const quoted = result === 'fail' ? lines.map((no) => `\n${entryText(session.entries[no - 1]!)}`).join('') : '';
		return `${row}\n${' '.repeat(10)}${why}${where}${quoted}`;
	});
	return `${rows.join('\n')}\n\n${summary(verdicts, level)}\n`;
}

function summary(verdicts: readonly Verdict[], level: Level): string {
	const count = (result: Verdict['result']) => verdicts.filter((verdict) => verdict.result === result).length;
	const rest = count('not-asked') > 0 ? ` ${count('not-asked')} could not come up here.` : '';
	if (isProved(verdicts)) return `The winder keeps the rules of level ${level}: ${count('pass')} seen and kept.${rest}`;
	const parts = [
		...(count('fail') > 0 ? [`${count('fail')} broken`] : []),
		...(count('not-shown') > 0 ? [`${count('not-shown')} not shown`] : [])
	];
	return `Not proved: ${parts.join(', ')}, ${count('pass')} seen and kept.${rest}`;
}

export function recordText({ entries }: Session): string {
	return `${entries.map(entryText).join('\n')}\n`;
}
