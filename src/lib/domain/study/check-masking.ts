import type { Report } from './check';
import { measuresBehind, openTo, type StudyDefinition } from './definition';

/**
 * Measures that could reveal the arm. Whoever enters one sees all that goes into what is derived from it, and
 * nobody else works it out again; nothing that the masked rely on may hang on it.
 */
export function checkMasking(definition: StudyDefinition, report: Report): void {
	const open = openTo(definition);
	if (open.size === 0) return;
	const name = new Map(definition.measures.map((measure) => [measure.key, measure.name]));
	definition.measures.forEach((measure, at) => {
		const path = `measures[${at}]`;
		const role = open.get(measure.key);
		if (!role) return;
		if (!definition.masked && measure.couldRevealArm)
			report('warns', path, 'REVEALING_UNMASKED', { measure: measure.name });
		if (measure.kind !== 'derived') return;
		for (const key of measuresBehind(measure))
			if (open.get(key) !== role)
				report('stops', path, 'REVEALING_MIXED', {
					measure: measure.name,
					input: name.get(key) ?? key
				});
	});
	if (open.has(definition.primaryMeasure))
		report('stops', 'primaryMeasure', 'REVEALING_PRIMARY', {
			measure: name.get(definition.primaryMeasure) ?? definition.primaryMeasure
		});
	definition.comparisons.forEach(({ lower, higher }, at) => {
		if (open.get(lower) !== open.get(higher))
			report('stops', `comparisons[${at}]`, 'REVEALING_COMPARED', {
				lower: name.get(lower) ?? lower,
				higher: name.get(higher) ?? higher
			});
	});
}
