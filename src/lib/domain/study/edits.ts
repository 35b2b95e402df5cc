import { bad, good, problem, type Problem, type Result } from '../problems';
import type { StudyDefinition } from './definition';
import type { EditedList } from './edit-lists';
import type { CellEdit, Edit } from './edits.input';
import {
	itemWord,
	keyField,
	keyOf,
	nameOf,
	stillReferring,
	withoutDependants,
	withReferences
} from './references';

type Item = Record<string, unknown>;
export type EditProblem = Problem<
	'EDIT_NO_SUCH' | 'EDIT_KEY_TAKEN' | 'EDIT_STILL_USED' | 'EDIT_KEY_BY_RENAMING' | 'EDIT_NO_CELL'
>;
type Edited = Result<StudyDefinition, EditProblem>;

/** Items of a list as plain records: which fields they may have is for the schema to say, once all edits are in. */
export const itemsOf = (definition: StudyDefinition, list: EditedList): readonly Item[] =>
	definition[list] as unknown as readonly Item[];

const withItems = (
	definition: StudyDefinition,
	list: EditedList,
	items: readonly Item[]
): StudyDefinition => ({
	...definition,
	[list]: list === 'visits' ? inOrder(items) : items
});

/** Visits are kept in the order that they say. */
const inOrder = (visits: readonly Item[]): readonly Item[] =>
	[...visits].sort((a, b) => Number(a.order) - Number(b.order));

const numbered = (list: EditedList, items: readonly Item[]): readonly Item[] =>
	list === 'visits' ? items.map((item, at) => ({ ...item, order: at + 1 })) : items;

/** Fields set to a value; null takes one away. Built anew, so that no name of a field can be a trap. */
function withFields(item: object, set: Readonly<Record<string, unknown>>): Item {
	const fields = new Map<string, unknown>(Object.entries(item));
	for (const [name, value] of Object.entries(set))
		if (value === null || value === undefined) fields.delete(name);
		else fields.set(name, value);
	return Object.fromEntries(fields);
}

const noSuch = (list: EditedList, key: string) =>
	bad(problem('EDIT_NO_SUCH', { what: itemWord[list], key }));

const find = (definition: StudyDefinition, list: EditedList, key: string): number =>
	itemsOf(definition, list).findIndex((item) => keyOf(list, item) === key);

function add(definition: StudyDefinition, edit: Extract<Edit, { edit: 'add' }>): Edited {
	const { list, at } = edit;
	const items = [...itemsOf(definition, list)];
	const key = keyOf(list, edit.item);
	if (find(definition, list, key) >= 0)
		return bad(problem('EDIT_KEY_TAKEN', { what: itemWord[list], key }));
	if (at !== undefined && at < items.length) {
		items.splice(at, 0, edit.item);
		return good(withItems(definition, list, numbered(list, items)));
	}
	const last = Number(items.at(-1)?.order ?? 0);
	const item =
		list === 'visits' && !(Number(edit.item.order) > last)
			? { ...edit.item, order: last + 1 }
			: edit.item;
	return good(withItems(definition, list, [...items, item]));
}

function change(definition: StudyDefinition, edit: Extract<Edit, { edit: 'change' }>): Edited {
	const { list, key, set } = edit;
	const at = find(definition, list, key);
	if (at < 0) return noSuch(list, key);
	const field = keyField[list];
	if (field !== null && field in set && set[field] !== key)
		return bad(problem('EDIT_KEY_BY_RENAMING', { what: itemWord[list] }));
	return good(
		withItems(
			definition,
			list,
			itemsOf(definition, list).map((item, index) => (index === at ? withFields(item, set) : item))
		)
	);
}

function rename(definition: StudyDefinition, edit: Extract<Edit, { edit: 'rename' }>): Edited {
	const { list, key, to } = edit;
	const field = keyField[list];
	if (field === null || find(definition, list, key) < 0) return noSuch(list, key);
	if (to !== key && find(definition, list, to) >= 0)
		return bad(problem('EDIT_KEY_TAKEN', { what: itemWord[list], key: to }));
	const renamed = withItems(
		definition,
		list,
		itemsOf(definition, list).map((item) => (item[field] === key ? { ...item, [field]: to } : item))
	);
	return good(withReferences(renamed, list, key, to));
}

function remove(definition: StudyDefinition, edit: Extract<Edit, { edit: 'remove' }>): Edited {
	const { list, key } = edit;
	const at = find(definition, list, key);
	if (at < 0) return noSuch(list, key);
	const item = itemsOf(definition, list)[at] as Item;
	const by = stillReferring(definition, list, key);
	if (by.length > 0)
		return bad(
			problem('EDIT_STILL_USED', {
				what: itemWord[list],
				name: nameOf(list, item, definition),
				by: by.join('; ')
			})
		);
	const without = withItems(
		definition,
		list,
		itemsOf(definition, list).filter((_, index) => index !== at)
	);
	return good(withoutDependants(without, list, key));
}

function move(definition: StudyDefinition, edit: Extract<Edit, { edit: 'move' }>): Edited {
	const { list, key, to } = edit;
	const at = find(definition, list, key);
	if (at < 0) return noSuch(list, key);
	const items = [...itemsOf(definition, list)];
	const [item] = items.splice(at, 1);
	items.splice(to, 0, item as Item);
	return good(withItems(definition, list, numbered(list, items)));
}

/** Where a measure goes in a visit's list: before the first one that stands later among the measures. */
function placeIn(keys: readonly string[], measure: string, rank: ReadonlyMap<string, number>) {
	const own = rank.get(measure) ?? Infinity;
	const at = keys.findIndex((key) => (rank.get(key) ?? Infinity) > own);
	return at < 0 ? keys.length : at;
}

function cells(definition: StudyDefinition, edits: readonly CellEdit[]): Edited {
	const rank = new Map(definition.measures.map((measure, at) => [measure.key, at]));
	const visits = new Set(definition.visits.map((visit) => visit.key));
	const schedule = new Map(
		Object.entries(definition.schedule).map(([key, keys]) => [key, [...keys]])
	);
	for (const { visit, measure, on, at } of edits) {
		const keys = schedule.get(visit) ?? [];
		if (on && (!visits.has(visit) || !rank.has(measure)))
			return bad(problem('EDIT_NO_CELL', { visit, measure }));
		const here = keys.indexOf(measure);
		if (on && here < 0) keys.splice(at ?? placeIn(keys, measure, rank), 0, measure);
		if (!on && here >= 0) keys.splice(here, 1);
		if (keys.length > 0) schedule.set(visit, keys);
		else schedule.delete(visit);
	}
	return good({ ...definition, schedule: Object.fromEntries(schedule) });
}

function applyEdit(definition: StudyDefinition, edit: Edit): Edited {
	switch (edit.edit) {
		case 'facts':
			return good(withFields(definition, edit.set) as unknown as StudyDefinition);
		case 'add':
			return add(definition, edit);
		case 'change':
			return change(definition, edit);
		case 'rename':
			return rename(definition, edit);
		case 'remove':
			return remove(definition, edit);
		case 'move':
			return move(definition, edit);
		case 'cells':
			return cells(definition, edit.cells);
	}
}

/**
 * The definition with the edits in it, one after the other, or why one of them cannot be. What comes out may not be a
 * readable definition yet: `readDefinition` says so, field by field. The definition given is left as it was.
 */
export function applyEdits(definition: StudyDefinition, edits: readonly Edit[]): Edited {
	let now = definition;
	for (const edit of edits) {
		const next = applyEdit(now, edit);
		if (!next.ok) return next;
		now = next.value;
	}
	return good(now);
}
