import type { StudyDefinition } from './definition';
import { applyEdits, itemsOf } from './edits';
import { editedLists, factFields, type EditedList } from './edit-lists';
import type { CellEdit, Edit } from './edits.input';
import { keyField, keyOf } from './references';
import { differingFields, same } from './same';

type Item = Readonly<Record<string, unknown>>;

/** The fields that differ with the values they are to have; null where they are to go. */
function settings(from: object, to: object, fields: readonly string[]): Record<string, unknown> {
	const wanted = to as Record<string, unknown>;
	return Object.fromEntries(
		differingFields(from, to)
			.filter((field) => fields.includes(field))
			.map((field) => [field, wanted[field] ?? null])
	);
}

function cellsBetween(from: StudyDefinition, to: StudyDefinition): CellEdit[] {
	const cells: CellEdit[] = [];
	for (const visit of new Set([...Object.keys(from.schedule), ...Object.keys(to.schedule)])) {
		const before = from.schedule[visit] ?? [];
		const after = to.schedule[visit] ?? [];
		if (same(before, after)) continue;
		const kept = before.filter((key) => after.includes(key));
		const sameOrder = same(
			kept,
			after.filter((key) => before.includes(key))
		);
		const out = sameOrder ? before.filter((key) => !after.includes(key)) : before;
		for (const measure of out) cells.push({ visit, measure, on: false });
		after.forEach((measure, at) => {
			if (!sameOrder || !before.includes(measure)) cells.push({ visit, measure, on: true, at });
		});
	}
	return cells;
}

/** Moves that bring the items into the wanted order, each into its place from the front. */
function moves(list: EditedList, now: readonly string[], wanted: readonly string[]): Edit[] {
	const order = [...now];
	const edits: Edit[] = [];
	wanted.forEach((key, to) => {
		const at = order.indexOf(key);
		if (at === to || at < 0) return;
		order.splice(at, 1);
		order.splice(to, 0, key);
		edits.push({ edit: 'move', list, key, to });
	});
	return edits;
}

/**
 * Edits that turn one definition into the other. What is new comes first and what goes comes last, so that nothing is
 * taken away while something still refers to it.
 */
export function editsBetween(from: StudyDefinition, to: StudyDefinition): Edit[] {
	const added: Edit[] = [];
	const changed: Edit[] = [];
	const removed: Edit[] = [];
	for (const list of editedLists) {
		const before = new Map(itemsOf(from, list).map((item) => [keyOf(list, item), item]));
		const after = new Map(itemsOf(to, list).map((item) => [keyOf(list, item), item]));
		for (const [key, item] of after) {
			const was = before.get(key);
			if (!was) added.push({ edit: 'add', list, item: item as Record<string, unknown> });
			else if (!same(was, item))
				changed.push({ edit: 'change', list, key, set: settings(was, item, fieldsOf(was, item)) });
		}
		for (const key of before.keys())
			if (!after.has(key)) removed.push({ edit: 'remove', list, key });
	}
	// An added visit takes a place at the end: the places it and its neighbours are to have are set once it is there.
	if (added.some((edit) => edit.edit === 'add' && edit.list === 'visits'))
		for (const visit of to.visits)
			if (!from.visits.some((each) => each.key === visit.key && each.order === visit.order))
				changed.push({
					edit: 'change',
					list: 'visits',
					key: visit.key,
					set: { order: visit.order }
				});
	const facts = settings(from, to, factFields);
	if (Object.keys(facts).length > 0) changed.push({ edit: 'facts', set: facts } as Edit);
	const cells = cellsBetween(from, to);
	if (cells.length > 0) changed.push({ edit: 'cells', cells });

	const content = [...added, ...changed, ...removed];
	const result = applyEdits(from, content);
	if (!result.ok) return content;
	// Removing something may have taken along what is to stay, and additions stand at the end of their lists.
	const order = editedLists
		.filter((list) => list !== 'visits')
		.flatMap((list) =>
			moves(
				list,
				itemsOf(result.value, list).map((item) => keyOf(list, item)),
				itemsOf(to, list).map((item) => keyOf(list, item))
			)
		);
	return [...content, ...order];
}

const fieldsOf = (a: Item, b: Item): string[] => [...Object.keys(a), ...Object.keys(b)];

/** The edits that take these ones back again. A new key is taken back as a new key, so that its history stays one. */
export function inverseOf(before: StudyDefinition, edits: readonly Edit[]): Edit[] {
	if (!edits.some((edit) => edit.edit === 'rename')) {
		const after = applyEdits(before, edits);
		return after.ok ? editsBetween(after.value, before) : [];
	}
	const inverse: Edit[] = [];
	let now = before;
	for (const edit of edits) {
		const next = applyEdits(now, [edit]);
		if (!next.ok) return [];
		inverse.unshift(
			...(edit.edit === 'rename' && keyField[edit.list] !== null
				? [{ ...edit, key: edit.to, to: edit.key }]
				: editsBetween(next.value, now))
		);
		now = next.value;
	}
	return inverse;
}
