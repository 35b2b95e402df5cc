import type { StudyDefinition } from './definition';
import type { EditedList } from './edit-lists';

type Item = Readonly<Record<string, unknown>>;

/** The word by which an item of a list is called in sentences. */
export const itemWord: Record<EditedList, string> = {
	arms: 'arm',
	strata: 'stratum',
	sites: 'site',
	characteristics: 'characteristic',
	visits: 'visit',
	measures: 'measure',
	comparisons: 'comparison',
	consentVersions: 'consent version',
	eligibility: 'criterion'
};

/** The field that holds an item's key; a comparison is known by both its measures. */
export const keyField: Record<EditedList, string | null> = {
	arms: 'key',
	strata: 'key',
	sites: 'code',
	characteristics: 'key',
	visits: 'key',
	measures: 'key',
	comparisons: null,
	consentVersions: 'version',
	eligibility: 'key'
};

export function keyOf(list: EditedList, item: Item): string {
	const field = keyField[list];
	return field === null ? `${item.lower}<${item.higher}` : String(item[field]);
}

/** What people call the item: its name, or its text, or its key. */
export function nameOf(list: EditedList, item: Item, definition: StudyDefinition): string {
	if (list === 'comparisons') {
		const name = (key: unknown) =>
			definition.measures.find((each) => each.key === key)?.name ?? String(key);
		return `${name(item.lower)} below ${name(item.higher)}`;
	}
	return String(item.name ?? item.text ?? keyOf(list, item));
}

const refersTo = (reference: string, kinds: readonly string[], key: string): boolean => {
	const colon = reference.indexOf(':');
	return kinds.includes(reference.slice(0, colon)) && reference.slice(colon + 1) === key;
};

const inputKinds: Partial<Record<EditedList, readonly string[]>> = {
	measures: ['measure'],
	characteristics: ['characteristic', 'age']
};

/** Who would be left without something when an item is taken away, in words; cells of the grid go along with it. */
export function stillReferring(
	definition: StudyDefinition,
	list: EditedList,
	key: string
): string[] {
	const found: string[] = [];
	if (list === 'visits') {
		if (definition.baselineVisit === key) found.push('the study’s baseline visit');
		for (const visit of definition.visits)
			if (visit.key !== key && visit.anchor === `visit:${key}`)
				found.push(`the visit “${visit.name}”, which is counted from it`);
	}
	if (list === 'measures') {
		if (definition.primaryMeasure === key) found.push('the study’s primary measure');
		for (const { lower, higher } of definition.comparisons)
			if (lower === key || higher === key) found.push('a comparison of two measures');
	}
	const kinds = inputKinds[list] ?? [];
	for (const measure of definition.measures) {
		if (measure.kind !== 'derived' || (list === 'measures' && measure.key === key)) continue;
		if (
			Object.values(measure.derivedBy.inputs).some((reference) => refersTo(reference, kinds, key))
		)
			found.push(`the measure “${measure.name}”, which is derived from it`);
	}
	return [...new Set(found)];
}

/** The definition with every reference to an item's old key pointing to its new one. */
export function withReferences(
	definition: StudyDefinition,
	list: EditedList,
	from: string,
	to: string
): StudyDefinition {
	const swap = (key: string) => (key === from ? to : key);
	const kinds = inputKinds[list] ?? [];
	const measures = definition.measures.map((measure) => {
		if (measure.kind !== 'derived') return measure;
		const inputs = Object.fromEntries(
			Object.entries(measure.derivedBy.inputs).map(([name, reference]) => [
				name,
				refersTo(reference, kinds, from)
					? `${reference.slice(0, reference.indexOf(':'))}:${to}`
					: reference
			])
		);
		return { ...measure, derivedBy: { ...measure.derivedBy, inputs } };
	});
	switch (list) {
		case 'visits':
			return {
				...definition,
				visits: definition.visits.map((visit) =>
					visit.anchor === `visit:${from}` ? { ...visit, anchor: `visit:${to}` } : visit
				),
				schedule: Object.fromEntries(
					Object.entries(definition.schedule).map(([visit, keys]) => [swap(visit), keys])
				),
				baselineVisit: swap(definition.baselineVisit)
			};
		case 'measures':
			return {
				...definition,
				measures,
				schedule: Object.fromEntries(
					Object.entries(definition.schedule).map(([visit, keys]) => [visit, keys.map(swap)])
				),
				comparisons: definition.comparisons.map((each) => ({
					...each,
					lower: swap(each.lower),
					higher: swap(each.higher)
				})),
				primaryMeasure: swap(definition.primaryMeasure)
			};
		case 'characteristics':
			return { ...definition, measures };
		case 'sites':
			return definition.enrolmentPlan
				? {
						...definition,
						enrolmentPlan: {
							...definition.enrolmentPlan,
							sites: definition.enrolmentPlan.sites.map((each) => ({
								...each,
								site: swap(each.site)
							}))
						}
					}
				: definition;
		default:
			return definition;
	}
}

/** The definition without what goes along with an item that is taken away. */
export function withoutDependants(
	definition: StudyDefinition,
	list: EditedList,
	key: string
): StudyDefinition {
	if (list === 'visits') {
		const { [key]: _, ...schedule } = definition.schedule;
		return { ...definition, schedule };
	}
	if (list === 'measures')
		return {
			...definition,
			schedule: Object.fromEntries(
				Object.entries(definition.schedule).map(([visit, keys]) => [
					visit,
					keys.includes(key) ? keys.filter((each) => each !== key) : keys
				])
			)
		};
	if (list === 'sites' && definition.enrolmentPlan)
		return {
			...definition,
			enrolmentPlan: {
				...definition.enrolmentPlan,
				sites: definition.enrolmentPlan.sites.filter((each) => each.site !== key)
			}
		};
	return definition;
}
