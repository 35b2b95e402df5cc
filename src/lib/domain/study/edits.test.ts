import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import { definitionText, normalised } from './definition-file';
import type { StudyDefinition } from './definition';
import { differences } from './differences';
import { applyEdits } from './edits';
import { editsBetween, inverseOf } from './edits-between';
import { editDraftInput, type Edit } from './edits.input';
import { anyEdits } from './edits.example';
import { changedPlaces, clash } from './places';
import { readDefinition } from './template';
import { studyTemplates } from './templates.server';

const trial = (): StudyDefinition =>
	normalised(studyTemplates.find(({ key }) => key === 'two-arm-trial')!.definition);

function edited(definition: StudyDefinition, ...edits: Edit[]): StudyDefinition {
	const result = applyEdits(definition, edits);
	if (!result.ok) throw new Error(result.problem.message);
	return result.value;
}
const refusal = (definition: StudyDefinition, ...edits: Edit[]) => {
	const result = applyEdits(definition, edits);
	return result.ok ? null : result.problem;
};
const visit = (definition: StudyDefinition, key: string) =>
	definition.visits.find((each) => each.key === key);

describe('edits of a draft', () => {
	it('set fields of an item, take optional ones away, and leave the rest and the original as they were', () => {
		const before = trial();
		const text = JSON.stringify(before);
		const after = edited(
			before,
			{ edit: 'change', list: 'visits', key: 'month-3', set: { name: 'Month three' } },
			{ edit: 'change', list: 'measures', key: 'creatinine', set: { softLow: null } },
			{ edit: 'facts', set: { plannedSubjects: 300, masked: false } }
		);
		expect(visit(after, 'month-3')?.name).toBe('Month three');
		expect(visit(after, 'month-3')?.target).toEqual({ amount: 3, unit: 'month' });
		expect(after.measures[0]).not.toHaveProperty('softLow');
		expect(after).toMatchObject({ plannedSubjects: 300, masked: false });
		expect(JSON.stringify(before)).toBe(text);
	});

	it('give a new key to everything that refers to the old one', () => {
		const after = edited(
			trial(),
			{ edit: 'change', list: 'visits', key: 'month-6', set: { anchor: 'visit:baseline' } },
			{ edit: 'rename', list: 'visits', key: 'baseline', to: 'day-0' },
			{ edit: 'rename', list: 'measures', key: 'creatinine', to: 'scr' },
			{ edit: 'rename', list: 'measures', key: 'systolic', to: 'sbp' },
			{ edit: 'rename', list: 'measures', key: 'egfr', to: 'gfr' },
			{ edit: 'rename', list: 'characteristics', key: 'birth-date', to: 'born' }
		);
		expect(after.baselineVisit).toBe('day-0');
		expect(visit(after, 'month-6')?.anchor).toBe('visit:day-0');
		expect(after.schedule['day-0']?.slice(0, 3)).toEqual(['scr', 'gfr', 'sbp']);
		expect(after.schedule).not.toHaveProperty('baseline');
		expect(after.comparisons).toEqual([{ lower: 'diastolic', higher: 'sbp' }]);
		expect(after.primaryMeasure).toBe('gfr');
		expect(after.measures[1]).toMatchObject({
			derivedBy: { inputs: { creatinine: 'measure:scr', age: 'age:born' } }
		});
		expect(JSON.stringify(after)).not.toContain('measure:creatinine');
	});

	it('a site keeps its place in the enrolment plan under its new code, and takes it along when it goes', () => {
		const planned = edited(trial(), {
			edit: 'facts',
			set: {
				enrolmentPlan: {
					from: '2026-06',
					months: 12,
					sites: [
						{ site: '01', subjects: 100 },
						{ site: '02', subjects: 140 }
					]
				}
			}
		});
		const renamed = edited(planned, { edit: 'rename', list: 'sites', key: '02', to: '07' });
		expect(renamed.enrolmentPlan?.sites[1]).toEqual({ site: '07', subjects: 140 });
		const without = edited(renamed, { edit: 'remove', list: 'sites', key: '07' });
		expect(without.enrolmentPlan?.sites).toEqual([{ site: '01', subjects: 100 }]);
	});

	it.each<[string, Edit, RegExp]>([
		['the baseline visit', { edit: 'remove', list: 'visits', key: 'baseline' }, /baseline visit/],
		['the primary measure', { edit: 'remove', list: 'measures', key: 'egfr' }, /primary measure/],
		[
			'an input of a formula',
			{ edit: 'remove', list: 'measures', key: 'creatinine' },
			/“Estimated filtration rate”/
		],
		['a compared measure', { edit: 'remove', list: 'measures', key: 'systolic' }, /comparison/],
		[
			'a characteristic that an age needs',
			{ edit: 'remove', list: 'characteristics', key: 'birth-date' },
			/“Estimated filtration rate”/
		]
	])('refuse to take away %s and say who still uses it', (_, edit, by) => {
		const said = refusal(trial(), edit);
		expect(said?.code).toBe('EDIT_STILL_USED');
		expect(said?.message).toMatch(by);
	});

	it('refuse to take away a visit from which another is counted', () => {
		const draft = edited(trial(), {
			edit: 'change',
			list: 'visits',
			key: 'month-9',
			set: { anchor: 'visit:month-6' }
		});
		expect(refusal(draft, { edit: 'remove', list: 'visits', key: 'month-6' })?.message).toContain(
			'“Month 9”'
		);
	});

	it('a measure that goes takes its row of the grid along, and a visit its column', () => {
		const after = edited(
			trial(),
			{ edit: 'remove', list: 'measures', key: 'weight' },
			{ edit: 'remove', list: 'visits', key: 'month-6' }
		);
		expect(Object.values(after.schedule).flat()).not.toContain('weight');
		expect(after.schedule).not.toHaveProperty('month-6');
	});

	it('refuse what is not there, keys that are taken, and keys changed by the side door', () => {
		const set = { name: 'X' };
		const draft = trial();
		expect(refusal(draft, { edit: 'change', list: 'visits', key: 'none', set })?.code).toBe(
			'EDIT_NO_SUCH'
		);
		expect(refusal(draft, { edit: 'move', list: 'arms', key: 'none', to: 0 })?.code).toBe(
			'EDIT_NO_SUCH'
		);
		expect(
			refusal(draft, { edit: 'rename', list: 'visits', key: 'month-1', to: 'month-3' })?.code
		).toBe('EDIT_KEY_TAKEN');
		expect(
			refusal(draft, { edit: 'add', list: 'arms', item: { key: 'a', name: 'A', ratio: 1 } })?.code
		).toBe('EDIT_KEY_TAKEN');
		expect(
			refusal(draft, { edit: 'change', list: 'visits', key: 'month-1', set: { key: 'x' } })?.code
		).toBe('EDIT_KEY_BY_RENAMING');
		expect(
			refusal(draft, { edit: 'cells', cells: [{ visit: 'none', measure: 'egfr', on: true }] })?.code
		).toBe('EDIT_NO_CELL');
	});

	it('cells keep the order of the measures; a whole row or column is a list of cells', () => {
		const draft = edited(trial(), {
			edit: 'cells',
			cells: [
				{ visit: 'week-2', measure: 'weight', on: true },
				{ visit: 'week-2', measure: 'creatinine', on: false },
				{ visit: 'month-1', measure: 'egfr', on: true }
			]
		});
		expect(draft.schedule['week-2']).toEqual([
			'egfr',
			'systolic',
			'diastolic',
			'weight',
			'potassium'
		]);
		expect(draft.schedule['month-1']).toEqual(trial().schedule['month-1']);
	});

	it('a visit that moves takes its place in the order, and the others make room', () => {
		const draft = edited(trial(), { edit: 'move', list: 'visits', key: 'month-24', to: 1 });
		expect(draft.visits.slice(0, 3).map((each) => [each.key, each.order])).toEqual([
			['baseline', 1],
			['month-24', 2],
			['week-2', 3]
		]);
		expect(draft.visits.map((each) => each.order)).toEqual([1, 2, 3, 4, 5, 6, 7, 8, 9]);
	});

	it('names of fields that are traps elsewhere are plain unknown fields here', () => {
		const set = JSON.parse('{"__proto__": {"polluted": true}, "constructor": 1}') as Record<
			string,
			unknown
		>;
		const result = applyEdits(trial(), [{ edit: 'change', list: 'visits', key: 'month-1', set }]);
		if (!result.ok) throw new Error('refused');
		expect(({} as Record<string, unknown>).polluted).toBeUndefined();
		expect(readDefinition(result.value).ok).toBe(false);
		expect(
			editDraftInput.safeParse({ edits: [{ edit: 'facts', set: { schedule: {} } }] }).success
		).toBe(false);
	});
});

describe('for any edits of any template', () => {
	const runs = { numRuns: 150, seed: 20261201 };
	const readable = (definition: StudyDefinition) => readDefinition(definition).ok;

	it('what one edit does, its inverse undoes, and the inverse of that does again', () => {
		fc.assert(
			fc.property(anyEdits, ({ definition, edits }) => {
				const after = edited(definition, ...edits);
				fc.pre(readable(after));
				const inverse = inverseOf(definition, edits);
				const back = edited(after, ...inverse);
				expect(definitionText(back)).toBe(definitionText(definition));
				expect(definitionText(edited(back, ...inverseOf(after, inverse)))).toBe(
					definitionText(after)
				);
			}),
			runs
		);
	});

	it('the edits between two definitions lead from one to the other', () => {
		fc.assert(
			fc.property(anyEdits, anyEdits, (one, other) => {
				const from = edited(one.definition, ...one.edits);
				const to = edited(other.definition, ...other.edits);
				fc.pre(readable(from) && readable(to));
				const result = applyEdits(from, editsBetween(from, to));
				if (result.ok) expect(definitionText(result.value)).toBe(definitionText(to));
				// Between two studies that share nothing, something may still be referred to when it is to go.
				else expect(result.problem.code).toBe('EDIT_STILL_USED');
			}),
			runs
		);
	});

	it('the difference is empty when, and only when, the two are the same', () => {
		fc.assert(
			fc.property(anyEdits, ({ definition, edits }) => {
				const after = edited(definition, ...edits);
				fc.pre(readable(after));
				const equal = definitionText(after) === definitionText(definition);
				const told = differences(normalised(definition), normalised(after));
				expect(told.length === 0).toBe(equal);
				expect(JSON.stringify(told)).not.toMatch(/\[object|undefined|null|NaN/);
				expect(changedPlaces(normalised(definition), normalised(after)).length === 0).toBe(equal);
			}),
			runs
		);
	});

	it('what does not clash can be applied before or after, with the same outcome', () => {
		fc.assert(
			fc.property(anyEdits, fc.integer(), ({ definition, edits: mine }, seed) => {
				const [other] = fc.sample(anyEdits, { seed, numRuns: 1 });
				const now = applyEdits(definition, other?.edits ?? []);
				if (!now.ok) return;
				const theirs = editsBetween(definition, now.value);
				// Whoever comes second is told of a clash: here either may be.
				if (clash(mine, definition, now.value)) return;
				if (clash(theirs, definition, edited(definition, ...mine))) return;
				const after = applyEdits(now.value, mine);
				const before = applyEdits(edited(definition, ...mine), theirs);
				// Another's edit may have made something refer to what mine takes away: then it is refused, in words.
				if (!after.ok || !before.ok) return;
				const differ = changedPlaces(after.value, before.value);
				expect(differ.filter((place) => !place.includes('order'))).toEqual([]);
			}),
			runs
		);
	});
});

describe('telling two people’s edits apart', () => {
	const named = (name: string): Edit => ({
		edit: 'change',
		list: 'visits',
		key: 'month-3',
		set: { name }
	});

	it('another field, another item and another cell are no clash; the same ones are', () => {
		const before = trial();
		const theirs = edited(before, named('Third month'), {
			edit: 'cells',
			cells: [{ visit: 'week-2', measure: 'weight', on: true }]
		});
		const wider: Edit = {
			edit: 'change',
			list: 'visits',
			key: 'month-3',
			set: { after: { amount: 20, unit: 'day' } }
		};
		expect(clash([wider], before, theirs)).toBe(false);
		expect(clash([named('Quarter')], before, theirs)).toBe(true);
		expect(clash([{ edit: 'remove', list: 'visits', key: 'month-3' }], before, theirs)).toBe(true);
		const cell = (measure: string): Edit => ({
			edit: 'cells',
			cells: [{ visit: 'week-2', measure, on: false }]
		});
		expect(clash([cell('potassium')], before, theirs)).toBe(false);
		expect(clash([cell('weight')], before, theirs)).toBe(true);
	});
});

describe('the difference of two versions, in words', () => {
	const says = (...edits: Edit[]) =>
		differences(trial(), edited(trial(), ...edits)).flatMap((each) => each.says);

	it('says what a person would say', () => {
		expect(
			says(
				{
					edit: 'change',
					list: 'visits',
					key: 'month-6',
					set: { after: { amount: 28, unit: 'day' }, anchor: 'visit:baseline' }
				},
				{ edit: 'change', list: 'measures', key: 'weight', set: { hardHigh: 300 } },
				{ edit: 'cells', cells: [{ visit: 'week-2', measure: 'weight', on: true }] },
				{ edit: 'remove', list: 'eligibility', key: 'other-trial' },
				{ edit: 'facts', set: { masked: false, plannedSubjects: null } }
			)
		).toEqual([
			'Masked from yes to no.',
			'Planned subjects from 240 to nothing.',
			'Visit “Month 6”: anchor from randomisation to “Baseline”; window after from 14 days to 28 days.',
			'Measure “Weight”: highest value accepted from 350 to 300.',
			'Criterion “Taking part in another trial of a treatment.” taken away.',
			'“Week 2” now measures Weight.'
		]);
	});
});
