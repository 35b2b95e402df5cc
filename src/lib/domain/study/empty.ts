import type { StudyDefinition } from './definition';

/** A study from nothing: one visit and one measure, because a study has at least these, and all else to be said. */
export const emptyDefinition = (code: string, name: string): StudyDefinition => ({
	format: 'heddle.study/1',
	code,
	name,
	masked: false,
	arms: [],
	strata: [],
	stratifyBySite: false,
	sites: [],
	characteristics: [],
	visits: [
		{
			key: 'baseline',
			name: 'Baseline',
			anchor: 'enrolment',
			target: { amount: 0, unit: 'day' },
			before: { amount: 0, unit: 'day' },
			after: { amount: 7, unit: 'day' },
			order: 1,
			lengthMinutes: 60
		}
	],
	measures: [
		{
			key: 'primary',
			name: 'Primary measure',
			kind: 'number',
			showLast: 'after',
			unit: '1',
			decimals: 1,
			notDoneReasons: ['Subject declined', 'Equipment not available', 'Subject unwell']
		}
	],
	comparisons: [],
	schedule: { baseline: ['primary'] },
	baselineVisit: 'baseline',
	primaryMeasure: 'primary',
	timeUnit: 'month',
	consentVersions: [],
	eligibility: []
});
