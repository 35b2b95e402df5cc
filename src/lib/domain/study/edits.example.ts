import { readdirSync, readFileSync } from 'node:fs';
import { resolve } from 'node:path';
import fc from 'fast-check';
import { normalised } from './definition-file';
import type { StudyDefinition } from './definition';
import { applyEdits, itemsOf } from './edits';
import { editedLists, type EditedList } from './edit-lists';
import type { Edit } from './edits.input';
import { keyOf } from './references';
import { readTemplate } from './template';

/** Random edits of the templates, for tests: each can be applied where it stands, and most leave a readable study. */
export const templates = readdirSync(resolve('templates/studies'))
	.filter((name) => name.endsWith('.json') && !name.endsWith('.schema.json'))
	.map((name) => {
		const read = readTemplate(readFileSync(resolve('templates/studies', name), 'utf8'));
		if (!read.ok) throw new Error(`The template ${name} does not hold`);
		return normalised(read.definition);
	});

const word = fc.stringMatching(/^[A-Z][a-z]{1,8}( [a-z]{1,6})?$/);
const key = fc.stringMatching(/^[a-z]{2,6}(-[0-9]{1,2})?$/);
const offset = fc.record({
	amount: fc.integer({ min: 0, max: 40 }),
	unit: fc.constantFrom('day', 'week', 'month')
});

/** Values for a field of an item, by list; every other field is left alone. */
const fields: Partial<Record<EditedList, Record<string, fc.Arbitrary<unknown>>>> = {
	arms: { name: word, ratio: fc.integer({ min: 1, max: 10 }) },
	strata: { name: word },
	sites: {
		name: word,
		zone: fc.constantFrom('UTC', 'Europe/Berlin', 'Asia/Tokyo'),
		rooms: fc.uniqueArray(fc.record({ key, name: word }), { maxLength: 3, selector: (r) => r.key }),
		closures: fc.constantFrom(null, [{ from: '2026-08-03', to: '2026-08-14', reason: 'Summer' }])
	},
	characteristics: { name: word },
	visits: { name: word, target: offset, before: offset, after: offset },
	measures: {
		name: word,
		showLast: fc.constantFrom('before', 'after', 'never'),
		couldRevealArm: fc.constantFrom(null, { enteredBy: 'pharmacist' })
	},
	consentVersions: { name: word, from: fc.constantFrom('2026-02-01', '2026-03-01') },
	eligibility: { text: word, kind: fc.constantFrom('inclusion', 'exclusion') }
};

const fresh: Record<EditedList, fc.Arbitrary<Record<string, unknown>>> = {
	arms: fc.record({ key, name: word, ratio: fc.integer({ min: 1, max: 3 }) }),
	strata: fc.record({
		key,
		name: word,
		levels: fc.constant([
			{ key: 'low', name: 'Low' },
			{ key: 'high', name: 'High' }
		])
	}),
	sites: fc.record({
		code: fc.stringMatching(/^[3-9][0-9]$/),
		name: word,
		zone: fc.constant('UTC'),
		openingHours: fc.constant([{ weekday: 1, opens: '08:00', closes: '12:00' }]),
		rooms: fc.constant([])
	}),
	characteristics: fc.record({ key, name: word, kind: fc.constant('birth-date') }),
	visits: fc.record({
		key,
		name: word,
		anchor: fc.constant('enrolment'),
		target: offset,
		before: offset,
		after: offset,
		order: fc.integer({ min: 0, max: 20 }),
		lengthMinutes: fc.integer({ min: 5, max: 90 })
	}),
	measures: fc.record({
		key,
		name: word,
		kind: fc.constant('text'),
		showLast: fc.constant('never'),
		maxLength: fc.integer({ min: 1, max: 200 }),
		notDoneReasons: fc.constant(['Declined'])
	}),
	comparisons: fc.record({ lower: key, higher: key }),
	consentVersions: fc.record({
		version: fc.stringMatching(/^[2-9]\.[0-9]$/),
		name: word,
		from: fc.constant('2026-01-05')
	}),
	eligibility: fc.record({ key, kind: fc.constant('inclusion'), text: word })
};

function oneEdit(definition: StudyDefinition): fc.Arbitrary<Edit> {
	const choices: fc.Arbitrary<Edit>[] = [
		fc.record({
			edit: fc.constant('facts' as const),
			set: fc.constantFrom<Record<string, unknown>>(
				{ name: 'Renamed' },
				{ plannedSubjects: null },
				{ plannedSubjects: 77, adverseEvents: false },
				{ minors: { majority: 18, assentFrom: 7 } },
				{ timeUnit: 'week', lostAfterAttempts: 3 }
			)
		}) as fc.Arbitrary<Edit>,
		fc.record({
			edit: fc.constant('cells' as const),
			cells: fc.array(
				fc.record({
					visit: fc.constantFrom(...definition.visits.map((each) => each.key)),
					measure: fc.constantFrom(...definition.measures.map((each) => each.key)),
					on: fc.boolean()
				}),
				{ minLength: 1, maxLength: 6 }
			)
		})
	];
	for (const list of editedLists) {
		const keys = itemsOf(definition, list).map((item) => keyOf(list, item));
		choices.push(
			fc.record({
				edit: fc.constant('add' as const),
				list: fc.constant(list),
				item: fresh[list],
				...(list === 'visits' ? {} : { at: fc.integer({ min: 0, max: keys.length }) })
			}) as fc.Arbitrary<Edit>
		);
		if (keys.length === 0) continue;
		const named = { list: fc.constant(list), key: fc.constantFrom(...keys) };
		for (const [field, value] of Object.entries(fields[list] ?? {}))
			choices.push(
				fc.record({
					edit: fc.constant('change' as const),
					...named,
					set: value.map((each) => ({ [field]: each }))
				})
			);
		choices.push(
			fc.record({ edit: fc.constant('remove' as const), ...named }),
			fc.record({
				edit: fc.constant('move' as const),
				...named,
				to: fc.integer({ min: 0, max: keys.length - 1 })
			})
		);
		if (!['comparisons', 'sites', 'consentVersions'].includes(list))
			choices.push(fc.record({ edit: fc.constant('rename' as const), ...named, to: key }));
	}
	return fc.oneof(...choices);
}

/** A template and edits of it that can be applied one after the other. */
export const anyEdits: fc.Arbitrary<{ definition: StudyDefinition; edits: Edit[] }> = fc
	.record({
		definition: fc.constantFrom(...templates),
		count: fc.integer({ min: 1, max: 5 }),
		seed: fc.integer()
	})
	.map(({ definition, count, seed }) => {
		let now = definition;
		const edits: Edit[] = [];
		for (let at = 0; at < count; at++) {
			const [edit] = fc.sample(oneEdit(now), { seed: seed + at, numRuns: 1 });
			if (!edit) continue;
			const next = applyEdits(now, [edit]);
			if (!next.ok) continue;
			now = next.value;
			edits.push(edit);
		}
		return { definition, edits };
	});
