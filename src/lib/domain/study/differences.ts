import type { StudyDefinition } from './definition';
import { itemsOf } from './edits';
import { editedLists, factFields, type EditedList } from './edit-lists';
import { itemWord, keyOf, nameOf } from './references';
import { differingFields, same } from './same';
import { fieldWords, valueWords } from './value-words';

/** What differs in one part of a study, in sentences. */
export interface Difference {
	section: string;
	says: string[];
}

const titles: Record<EditedList, string> = {
	arms: 'Arms',
	strata: 'Strata',
	sites: 'Sites',
	characteristics: 'Asked once, at enrolment',
	visits: 'Visits',
	measures: 'Measures',
	comparisons: 'Comparisons of measures',
	consentVersions: 'Consent',
	eligibility: 'Eligibility'
};

const capital = (text: string) => text.charAt(0).toUpperCase() + text.slice(1);

function changes(
	was: object,
	is: object,
	fields: readonly string[],
	before: StudyDefinition,
	after: StudyDefinition
): string[] {
	const [old, now] = [was as Record<string, unknown>, is as Record<string, unknown>];
	return fields.map((field) => {
		const from = valueWords(field, old[field], before);
		const to = valueWords(field, now[field], after);
		// What reads the same differs in a key or in an order of its own.
		return from === to
			? `${fieldWords(field)} changed in its keys`
			: `${fieldWords(field)} from ${from} to ${to}`;
	});
}

function listChanges(list: EditedList, before: StudyDefinition, after: StudyDefinition): string[] {
	const says: string[] = [];
	const was = new Map(itemsOf(before, list).map((item) => [keyOf(list, item), item]));
	const is = new Map(itemsOf(after, list).map((item) => [keyOf(list, item), item]));
	const word = capital(itemWord[list]);
	for (const [key, item] of is)
		if (!was.has(key)) says.push(`${word} “${nameOf(list, item, after)}” added.`);
	for (const [key, item] of was)
		if (!is.has(key)) says.push(`${word} “${nameOf(list, item, before)}” taken away.`);
	for (const [key, item] of is) {
		const old = was.get(key);
		if (!old || same(old, item)) continue;
		const told = changes(old, item, differingFields(old, item), before, after);
		says.push(`${word} “${nameOf(list, old, before)}”: ${told.join('; ')}.`);
	}
	const kept = [...was.keys()].filter((key) => is.has(key));
	const now = [...is.keys()].filter((key) => was.has(key));
	if (!same(kept, now) && list !== 'visits')
		says.push(
			`New order: ${now.map((key) => `“${nameOf(list, is.get(key) ?? {}, after)}”`).join(', ')}.`
		);
	return says;
}

function gridChanges(before: StudyDefinition, after: StudyDefinition): string[] {
	const says: string[] = [];
	const measure = (definition: StudyDefinition) => (key: string) =>
		definition.measures.find((each) => each.key === key)?.name ?? key;
	const visits = [
		...after.visits,
		...before.visits.filter(({ key }) => !after.visits.some((each) => each.key === key))
	].map(({ key, name }) => [key, name] as const);
	const strays = [...Object.keys(before.schedule), ...Object.keys(after.schedule)].filter(
		(key) => !visits.some(([known]) => known === key)
	);
	for (const [key, name] of [
		...visits,
		...[...new Set(strays)].map((key) => [key, key] as const)
	]) {
		const was = before.schedule[key] ?? [];
		const is = after.schedule[key] ?? [];
		if (same(was, is)) continue;
		const added = is.filter((each) => !was.includes(each)).map(measure(after));
		const gone = was.filter((each) => !is.includes(each)).map(measure(before));
		const told = [
			added.length > 0 && `now measures ${added.join(', ')}`,
			gone.length > 0 && `no longer measures ${gone.join(', ')}`,
			added.length + gone.length === 0 && 'measures the same in another order'
		].filter(Boolean);
		says.push(`“${name}” ${told.join('; ')}.`);
	}
	return says;
}

/** How the second definition differs from the first, matched by key; nothing when they are the same. */
export function differences(before: StudyDefinition, after: StudyDefinition): Difference[] {
	const facts = differingFields(before, after).filter((field) =>
		(factFields as readonly string[]).includes(field)
	);
	const sections: Difference[] = [
		{
			section: 'Study',
			says: changes(before, after, facts, before, after).map((each) => `${capital(each)}.`)
		},
		...editedLists.map((list) => ({
			section: titles[list],
			says: listChanges(list, before, after)
		})),
		{ section: 'Schedule of activities', says: gridChanges(before, after) }
	];
	return sections.filter(({ says }) => says.length > 0);
}
