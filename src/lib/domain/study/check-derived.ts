import { converts } from '../../units/convert';
import { formulaOf, type FormulaInput } from '../measurement/formulas';
import type { Report } from './check';
import {
	measuresBehind,
	type Characteristic,
	type DerivedMeasure,
	type Measure,
	type StudyDefinition
} from './definition';

const splitReference = (reference: string): [string, string] => {
	const colon = reference.indexOf(':');
	return [reference.slice(0, colon), reference.slice(colon + 1)];
};

/** Derived measures: their formulas have what they need, in units that convert, at every visit they stand in. */
export function checkDerived(definition: StudyDefinition, report: Report): void {
	const measures = new Map(definition.measures.map((each) => [each.key, each]));
	const characteristics = new Map(definition.characteristics.map((each) => [each.key, each]));
	definition.measures.forEach((measure, at) => {
		if (measure.kind !== 'derived') return;
		const path = `measures[${at}].derivedBy`;
		checkInputs(measure, path, measures, characteristics, report);
		checkCycle(measure, path, measures, report);
		checkVisits(definition, measure, path, measures, report);
		checkBaseline(definition, measure, path, measures, report);
	});
}

function checkInputs(
	measure: DerivedMeasure,
	path: string,
	measures: ReadonlyMap<string, Measure>,
	characteristics: ReadonlyMap<string, Characteristic>,
	report: Report
): void {
	const { formula: key, inputs } = measure.derivedBy;
	const formula = formulaOf(key);
	for (const input of Object.keys(formula.inputs))
		if (!inputs[input]) report('stops', path, 'FORMULA_INPUT_MISSING', { formula: key, input });
	if (formula.variadic && Object.keys(inputs).length === 0)
		report('stops', path, 'FORMULA_INPUT_MISSING', { formula: key, input: 'a value' });
	if (formula.unit !== 'as inputs' && !converts(formula.unit, measure.unit))
		report('stops', path, 'UNIT_DOES_NOT_CONVERT', { from: formula.unit, to: measure.unit });

	for (const [input, reference] of Object.entries(inputs)) {
		// A formula that takes what it is given takes it in the unit of the measure.
		const needed: FormulaInput | undefined =
			formula.unit === 'as inputs' && (formula.variadic || formula.inputs[input])
				? { kind: 'number', unit: measure.unit, name: input }
				: formula.inputs[input];
		if (!needed) {
			report('stops', path, 'FORMULA_INPUT_UNKNOWN', { formula: key, input });
			continue;
		}
		const [kind, name] = splitReference(reference);
		const source = kind === 'measure' ? measures.get(name) : characteristics.get(name);
		if (!source) {
			if (kind === 'measure') report('stops', path, 'MEASURE_UNKNOWN', { measure: name });
			else report('stops', path, 'CHARACTERISTIC_UNKNOWN', { characteristic: name });
			continue;
		}
		const wrong = whyUnfit(needed, kind, source);
		if (wrong) report('stops', path, 'FORMULA_INPUT_KIND', { reference, input, needs: wrong });
	}
}

/** What the input needs and the source is not, or null when it fits. */
function whyUnfit(
	needed: FormulaInput,
	kind: string,
	source: Measure | Characteristic
): string | null {
	switch (needed.kind) {
		case 'age':
			return kind === 'age' && source.kind === 'birth-date' ? null : 'an age from a birth date';
		case 'choice': {
			if (source.kind === 'choice' && kind !== 'age') {
				const keys = source.choices.map((choice) => choice.key);
				if (needed.choices.every((choice) => keys.includes(choice))) return null;
			}
			return `a choice with the keys ${needed.choices.join(' and ')}`;
		}
		case 'number': {
			const analyte = needed.analyte ?? ('analyte' in source ? source.analyte : undefined);
			if (kind !== 'age' && 'unit' in source && converts(source.unit, needed.unit, analyte))
				return null;
			return `a number that converts to ${needed.unit}`;
		}
	}
}

function checkCycle(
	measure: DerivedMeasure,
	path: string,
	measures: ReadonlyMap<string, Measure>,
	report: Report
): void {
	const seen = new Set<string>();
	const open = measuresBehind(measure);
	for (let key = open.pop(); key !== undefined; key = open.pop()) {
		if (key === measure.key) {
			report('stops', path, 'FORMULA_CYCLE', { measure: measure.name });
			return;
		}
		if (seen.has(key)) continue;
		seen.add(key);
		const source = measures.get(key);
		if (source?.kind === 'derived') open.push(...measuresBehind(source));
	}
}

/** A change from baseline needs its value at the baseline visit, and has no sense before it. */
function checkBaseline(
	definition: StudyDefinition,
	measure: DerivedMeasure,
	path: string,
	measures: ReadonlyMap<string, Measure>,
	report: Report
): void {
	if (!formulaOf(measure.derivedBy.formula).fromBaseline) return;
	const baseline = definition.visits.find((visit) => visit.key === definition.baselineVisit);
	if (!baseline) return;
	for (const key of measuresBehind(measure))
		if (measures.has(key) && !definition.schedule[baseline.key]?.includes(key))
			report('stops', path, 'BASELINE_OF_CHANGE', {
				measure: measure.name,
				visit: baseline.name,
				input: measures.get(key)?.name ?? key
			});
	for (const visit of definition.visits)
		if (visit.order < baseline.order && definition.schedule[visit.key]?.includes(measure.key))
			report('stops', path, 'BASELINE_OF_CHANGE_LATER', {
				measure: measure.name,
				at: visit.name,
				visit: baseline.name
			});
}

function checkVisits(
	definition: StudyDefinition,
	measure: DerivedMeasure,
	path: string,
	measures: ReadonlyMap<string, Measure>,
	report: Report
): void {
	for (const visit of definition.visits) {
		const here = definition.schedule[visit.key] ?? [];
		if (!here.includes(measure.key)) continue;
		for (const key of measuresBehind(measure))
			if (measures.has(key) && !here.includes(key))
				report('stops', path, 'FORMULA_INPUT_NOT_AT_VISIT', {
					measure: measure.name,
					visit: visit.name,
					input: measures.get(key)?.name ?? key
				});
	}
}
