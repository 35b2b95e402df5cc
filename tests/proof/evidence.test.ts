import { expect, test } from 'vitest';
import { evidence, type EvidenceVerdict } from '$lib/stats';
import { fading, inventStudy, lasting, type Truth } from '../../src/lib/stats/evidence/example';

/** Seeds were fixed before the first run. Lag-1 correlation is 0.5 for either kind. */
const SEED = 20261215;

function tally(name: string, truth: Truth, subjects: number, visits: number, count: number) {
	const verdicts = new Map<EvidenceVerdict, number>();
	let [claimed, failed, refits, together] = [0, 0, 0, 0];
	for (let k = 0; k < count; k++) {
		const design = inventStudy(truth, subjects, visits, [SEED, subjects * 1e6 + visits * 1e4 + k]);
		const { answers, refitted } = evidence(design, { refits: 100, seed: SEED + k });
		verdicts.set(answers.verdict, (verdicts.get(answers.verdict) ?? 0) + 1);
		if (answers.lastingOffset === 'yes') claimed++;
		if (answers.together === 'yes') together++;
		failed += refitted.failed;
		refits += refitted.refits;
	}
	const shares = [...verdicts].map(([verdict, n]) => `${verdict} ${n}`).join(', ');
	console.log(
		`${name}, ${subjects} subjects × ${visits} visits, ${count} data sets: ${shares}; a lasting offset claimed in ${claimed}, visits that move everyone in ${together}; ${failed} of ${refits} refits failed`
	);
	return { share: (verdict: EvidenceVerdict) => (verdicts.get(verdict) ?? 0) / count, claimed };
}

test.each([
	['a lasting offset', 'lasting', lasting, 240, 4, 100],
	['errors that fade', 'fading', fading, 240, 4, 100],
	['a lasting offset', 'lasting', lasting, 60, 9, 150],
	['errors that fade', 'fading', fading, 60, 9, 150]
] as const)(
	'%s (%s), %#: the right kind in at least 95 of 100',
	(name, kind, truth, subjects, visits, count) => {
		expect(tally(name, truth, subjects, visits, count).share(kind)).toBeGreaterThanOrEqual(0.95);
	}
);

test.each([
	['a lasting offset', lasting],
	['errors that fade', fading]
] as const)('%s, 5 subjects × 4 visits: mostly too short to tell', (name, truth) => {
	expect(tally(name, truth, 5, 4, 300).share('too-short')).toBeGreaterThan(0.5);
});

test.each([
	['a lasting offset', lasting],
	['errors that fade', fading]
] as const)('%s, one subject × 40 visits: a lasting offset is never claimed', (name, truth) => {
	expect(tally(name, truth, 1, 40, 300).claimed).toBe(0);
});
