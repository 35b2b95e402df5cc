import { describe, expect, it } from 'vitest';
import type { CutContent, CutSubject, CutValue } from '../cut/content';
import { lookSpec, sameModel, type LookSpec } from './look.input';
import { rowsFromCut, Unanswerable } from './rows';
import { wordsOf } from './words';

const value = (number: number | null, change: Partial<CutValue> = {}): CutValue => ({
	value: number,
	text: null,
	readings: null,
	unit: 'kg',
	notDone: number === null ? 'Not done' : null,
	takenAt: null,
	enteredAt: '2026-01-01T00:00:00.000Z',
	source: 'form',
	...change
});

const subject = (number: string, change: Partial<CutSubject> = {}): CutSubject => ({
	id: `id-${number}`,
	number,
	importedAs: null,
	site: '01',
	enrolledOn: '2026-01-01',
	randomisedOn: '2026-01-11',
	stratum: {},
	characteristics: { sex: 'female', age: 40 },
	exits: [],
	visits: [
		{
			key: 'baseline',
			name: 'Baseline',
			position: 1,
			status: 'completed',
			happenedOn: '2026-01-11',
			studyTime: null,
			values: { weight: value(70) }
		},
		{
			key: 'month-1',
			name: 'Month 1',
			position: 2,
			status: 'completed',
			happenedOn: '2026-01-25',
			studyTime: null,
			values: { weight: value(71) }
		}
	],
	...change
});

const content = (subjects: CutSubject[], change: Partial<CutContent> = {}): CutContent => ({
	format: 'heddle.cut/1',
	study: 's',
	cutOffAt: '2026-06-01T00:00:00.000Z',
	protocolVersion: 1,
	anchor: 'randomisation',
	timeUnit: 'year',
	baselineVisit: 'baseline',
	measures: [
		{ key: 'weight', name: 'Weight', kind: 'number', unit: 'kg', decimals: 1 },
		{ key: 'note', name: 'Note', kind: 'text', unit: null, decimals: 0 }
	],
	characteristics: [
		{
			key: 'sex',
			name: 'Sex',
			kind: 'choice',
			choices: [
				{ key: 'male', name: 'Man' },
				{ key: 'female', name: 'Woman' },
				{ key: 'other', name: 'Other' }
			]
		},
		{ key: 'age', name: 'Age', kind: 'number', unit: 'a', decimals: 0 },
		{ key: 'born', name: 'Born', kind: 'birth-date' }
	],
	sites: [
		{ code: '01', name: 'Northmoor' },
		{ code: '02', name: 'Saltreach' }
	],
	subjects,
	...change
});

const spec = (change: Partial<LookSpec> = {}): LookSpec =>
	lookSpec.parse({ measure: 'weight', timeUnit: 'day', group: 'none', ...change });

describe('rows of a look', () => {
	it('take actual days from the anchor, in the unit asked for', () => {
		const one = content([subject('1')]);
		expect(rowsFromCut(one, spec()).rows.map(({ time }) => time)).toEqual([0, 14]);
		expect(rowsFromCut(one, spec({ timeUnit: 'week' })).rows[1]?.time).toBe(2);
		expect(rowsFromCut(one, spec({ timeUnit: 'year' })).rows[1]?.time).toBeCloseTo(14 / 365.25, 12);
		const cohort = content([subject('1')], { anchor: 'enrolment' });
		expect(rowsFromCut(cohort, spec()).rows.map(({ time }) => time)).toEqual([10, 24]);
	});

	it('take a study time as the file gave it, and say which visits have none', () => {
		const given = subject('1');
		(given.visits[0] as { studyTime: number | null }).studyTime = 0.25;
		const { rows, leftOut } = rowsFromCut(content([given]), spec({ timeUnit: 'as given' }));
		expect(rows.map(({ time }) => time)).toEqual([0.25]);
		expect(leftOut).toEqual(['1 visit without a study time is not in the analysis.']);
	});

	it('say which subjects cannot be placed in time or in an arm', () => {
		const known = content([
			subject('1'),
			subject('2', { randomisedOn: null }),
			subject('3'),
			subject('4', { randomisedOn: null })
		]);
		const arms = new Map([['id-1', 'A']]);
		const { rows, leftOut } = rowsFromCut(known, spec({ group: 'arms' }), arms);
		expect(rows.map(({ subject: who, group }) => [who, group])).toEqual([
			['1', 'A'],
			['1', 'A']
		]);
		expect(leftOut).toEqual([
			'2 subjects without a day of randomisation cannot be placed in time and are not in the analysis.',
			'1 subject without an allocation cannot be placed in an arm and is not in the analysis.'
		]);
	});

	it('keep an occasion without a value as a missing outcome', () => {
		const missing = subject('1');
		(missing.visits[1] as { values: Record<string, CutValue> }).values = { weight: value(null) };
		expect(rowsFromCut(content([missing]), spec()).rows.map(({ outcome }) => outcome)).toEqual([
			70,
			null
		]);
	});

	it('bring every value to the measure’s own unit, and refuse one that does not convert', () => {
		const pounds = subject('1');
		(pounds.visits[0] as { values: Record<string, CutValue> }).values = {
			weight: value(150, { unit: '[lb_av]' })
		};
		expect(rowsFromCut(content([pounds]), spec()).rows[0]?.outcome).toBeCloseTo(68.0388555, 7);
		(pounds.visits[0] as { values: Record<string, CutValue> }).values = {
			weight: value(150, { unit: 'cm' })
		};
		expect(() => rowsFromCut(content([pounds]), spec())).toThrow(Unanswerable);
	});

	it('name levels as people do, in the study’s order, and only those that occur', () => {
		const two = content([
			subject('1'),
			subject('2', { characteristics: { sex: 'male' }, site: '02' })
		]);
		const made = rowsFromCut(two, spec({ group: 'characteristic:sex', covariates: ['site'] }));
		expect(made.spec.group).toEqual({ levels: ['Man', 'Woman'] });
		expect(made.spec.covariates).toEqual([
			{ name: 'site', kind: 'categorical', levels: ['Northmoor', 'Saltreach'] }
		]);
		expect(made.rows[0]).toMatchObject({ group: 'Woman', covariates: { site: 'Northmoor' } });
	});

	it('a level that only incomplete rows have is none', () => {
		const two = content([
			subject('1'),
			subject('2', { characteristics: { sex: 'male', age: null } })
		]);
		const made = rowsFromCut(
			two,
			spec({ group: 'characteristic:sex', covariates: ['characteristic:age'] })
		);
		expect(made.spec.group).toEqual({ levels: ['Woman'] });
	});

	it('the baseline, once adjusted for, is no outcome', () => {
		const { rows, spec: asked } = rowsFromCut(
			content([subject('1')]),
			spec({ covariates: ['baseline'] })
		);
		expect(rows).toEqual([{ subject: '1', time: 14, outcome: 71, covariates: { baseline: 70 } }]);
		expect(asked.covariates).toEqual([{ name: 'baseline', kind: 'numeric' }]);
	});

	it.each([
		[{ measure: 'height' }, /not in the cut/],
		[{ measure: 'note' }, /not a number/],
		[{ group: 'arms' }, /independent statistician/],
		[{ group: 'characteristic:age' }, /choices/],
		[{ covariates: ['characteristic:born'] }, /cannot be adjusted for/]
	] as const)('refuse %j', (change, why) => {
		expect(() => rowsFromCut(content([subject('1')]), spec(change as never))).toThrow(why);
	});
});

describe('the sentence', () => {
	it('says what is asked and how', () => {
		expect(
			wordsOf(
				spec({
					timeUnit: 'year',
					group: 'characteristic:sex',
					covariates: ['site', 'baseline', 'characteristic:age']
				}),
				content([])
			)
		).toMatchObject({
			question: 'Compare the yearly change in Weight between groups by sex.',
			model:
				'Compare the yearly change in Weight between groups by sex, adjusting for site, value at baseline (which then is no outcome) and age, giving each subject its own level, with leftover errors independent; fitted by restricted likelihood, small-sample correction Kenward–Roger.',
			time: { name: 'time since randomisation', unit: 'years', one: 'year' },
			group: { kind: 'characteristic', label: 'Sex' }
		});
	});

	it('is the same model in whatever order covariates were chosen', () => {
		const a = spec({ covariates: ['site', 'baseline'] });
		expect(sameModel(a, spec({ covariates: ['baseline', '', 'site', 'site'] }))).toBe(true);
		expect(sameModel(a, spec({ covariates: ['site'] }))).toBe(false);
		expect(sameModel(a, { ...a, method: 'ML' })).toBe(false);
	});
});
