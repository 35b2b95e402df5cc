import type { AnalysisPlan } from '../plan.js';
import type { Columns } from './columns.js';

/** For tests only: a small study with gaps, in no particular order. */
export const study: Columns = {
	who: ['b', 'a', 'a', 'b', 'a', 'c', 'c', 'd', 'd', 'd', 'e', 'e', 'c', 'f'],
	when: [0, 4, 0, 2, 2, 0, 2, 0, 2, 4, 0, 4, 4, 0],
	visit: [
		'start',
		'end',
		'start',
		'mid',
		'mid',
		'start',
		'mid',
		'start',
		'mid',
		'end',
		'start',
		'end',
		'end',
		'start'
	],
	arm: [1, 0, 0, 1, 0, 1, 1, 0, 0, 0, 1, 1, 1, null],
	site: ['T', 'S', 'S', 'T', 'S', 'N', 'N', 'T', 'T', 'N', 'S', 'S', 'N', 'S'],
	bmi: [20, 21, 22, 20, 21, 25, null, 23, 23, 24, 19, 18, 26, 22],
	y: [5, 7, 4, 8, 6, 9, 8, 3, null, 2.5, 7, 8, 9.5, 4]
};

/** A plan for `study`, with parts replaced. */
export function planWith(
	change: Partial<AnalysisPlan> = {},
	mean: Partial<AnalysisPlan['mean']> = {}
): AnalysisPlan {
	return {
		outcome: 'y',
		scale: 'identity',
		subject: 'who',
		time: 'when',
		visit: 'visit',
		group: 'arm',
		subjectEffects: 'level',
		visitEffects: false,
		errors: { structure: 'independent', along: 'time', varianceBy: 'none' },
		method: 'reml',
		degreesOfFreedom: 'satterthwaite',
		...change,
		mean: { time: 'linear', groupByTime: true, commonBaseline: false, covariates: [], ...mean }
	};
}
