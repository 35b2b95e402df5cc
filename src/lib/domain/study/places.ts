import type { StudyDefinition } from './definition';
import { itemsOf } from './edits';
import { editedLists, factFields } from './edit-lists';
import type { Edit } from './edits.input';
import { keyOf } from './references';
import { differingFields, same } from './same';

/** A place in a definition, as steps from the outside in: 'visits/month-3/name', 'cells/month-3/weight'. */
type Place = string;

const orderOf = (list: string): Place => `${list}/#order`;

/** The places that edits set. */
export function touchedPlaces(edits: readonly Edit[]): Place[] {
	return edits.flatMap((edit): Place[] => {
		switch (edit.edit) {
			case 'facts':
				return Object.keys(edit.set).map((field) => `facts/${field}`);
			case 'add':
				return [`${edit.list}/${keyOf(edit.list, edit.item)}`];
			case 'change':
				return Object.keys(edit.set).map((field) => `${edit.list}/${edit.key}/${field}`);
			case 'rename':
				return [`${edit.list}/${edit.key}`, `${edit.list}/${edit.to}`];
			case 'remove':
				return [`${edit.list}/${edit.key}`];
			case 'move':
				return [orderOf(edit.list), `${edit.list}/${edit.key}/order`];
			case 'cells':
				return edit.cells.map(({ visit, measure }) => `cells/${visit}/${measure}`);
		}
	});
}

/** The places in which two definitions differ. */
export function changedPlaces(before: StudyDefinition, after: StudyDefinition): Place[] {
	const places: Place[] = differingFields(before, after)
		.filter((field) => (factFields as readonly string[]).includes(field))
		.map((field) => `facts/${field}`);
	for (const list of editedLists) {
		const was = new Map(itemsOf(before, list).map((item) => [keyOf(list, item), item]));
		const is = new Map(itemsOf(after, list).map((item) => [keyOf(list, item), item]));
		for (const [key, item] of is) {
			const old = was.get(key);
			if (!old) places.push(`${list}/${key}`);
			else places.push(...differingFields(old, item).map((field) => `${list}/${key}/${field}`));
		}
		for (const key of was.keys()) if (!is.has(key)) places.push(`${list}/${key}`);
		const common = (items: ReadonlyMap<string, unknown>, other: ReadonlyMap<string, unknown>) =>
			[...items.keys()].filter((key) => other.has(key));
		if (!same(common(was, is), common(is, was))) places.push(orderOf(list));
	}
	for (const visit of new Set([...Object.keys(before.schedule), ...Object.keys(after.schedule)])) {
		const [was, is] = [before.schedule[visit] ?? [], after.schedule[visit] ?? []];
		for (const key of new Set([...was, ...is]))
			if (was.includes(key) !== is.includes(key)) places.push(`cells/${visit}/${key}`);
	}
	return places;
}

const within = (a: Place, b: Place) => a === b || a.startsWith(`${b}/`) || b.startsWith(`${a}/`);

/** Whether edits set something that was changed between the two definitions. */
export function clash(
	edits: readonly Edit[],
	before: StudyDefinition,
	after: StudyDefinition
): boolean {
	const changed = changedPlaces(before, after);
	return touchedPlaces(edits).some((mine) => changed.some((theirs) => within(mine, theirs)));
}
