import { convert, converts, roundTo } from '../../units/convert';
import type { UnitCode } from '../../units/units';
import { ageInYears, findPlainDate, type LeapBirthday, type PlainDate } from '../../time/dates';
import { bad, good, problem, type Problem, type Result } from '../problems';
import type { DerivedMeasure, Measure, StudyDefinition } from '../study/definition';
import type { MeasuredNumber } from './compare';
import { formulaOf, type Formula, type FormulaInput, type InputValues } from './formulas';

/** What is known of the subject on the day of the visit. */
export type DeriveContext = {
	/** The day the measures were taken: ages are of that day. */
	on: PlainDate;
	measures: Readonly<Record<string, MeasuredNumber | null | undefined>>;
	/** Numbers, keys of choices, and birth dates, by the key of the characteristic. */
	characteristics: Readonly<Record<string, string | number | MeasuredNumber | null | undefined>>;
	/** Values at the study’s baseline visit by the key of the measure; at that visit itself, 'here'. */
	baseline?: Readonly<Record<string, MeasuredNumber | null | undefined>> | 'here';
	leapBirthday?: LeapBirthday;
};

export type Derived = {
	value: number;
	unit: UnitCode;
	formula: string;
	formulaText: string;
	source: string;
	/** What went in, in the formula's own units. */
	inputs: InputValues;
};

export type DeriveProblem = Problem<'DERIVED_INPUT_ABSENT' | 'DERIVED_OUT_OF_SCOPE'>;

/** The value of a derived measure, or why there is none. Units are the formula's: inputs and result are converted. */
export function derive(
	measure: DerivedMeasure,
	context: DeriveContext
): Result<Derived, DeriveProblem> {
	const formula = formulaOf(measure.derivedBy.formula);
	const values: Record<string, number | string> = {};
	for (const [name, reference] of Object.entries(measure.derivedBy.inputs)) {
		const needed = neededFor(measure, formula, name);
		const value = inputValue(needed, reference, context);
		if (value === null)
			return bad(problem('DERIVED_INPUT_ABSENT', { measure: measure.name, input: needed.name }));
		values[name] = value;
	}
	if (formula.fromBaseline) {
		const reference = measure.derivedBy.inputs.value ?? '';
		const found = baselineValue(neededFor(measure, formula, 'value'), reference, context);
		if (found === null)
			return bad(
				problem('DERIVED_INPUT_ABSENT', {
					measure: measure.name,
					input: 'the value at the baseline visit'
				})
			);
		values.baseline = found;
	}
	const missing = Object.keys(formula.inputs).find((name) => !(name in values));
	if (missing)
		return bad(
			problem('DERIVED_INPUT_ABSENT', {
				measure: measure.name,
				input: formula.inputs[missing]?.name ?? missing
			})
		);
	const why = formula.outOfScope?.(values) ?? null;
	if (why !== null) return bad(problem('DERIVED_OUT_OF_SCOPE', { measure: measure.name, why }));
	const raw = formula.compute(values);
	if (!Number.isFinite(raw))
		return bad(
			problem('DERIVED_OUT_OF_SCOPE', { measure: measure.name, why: 'the values give no number' })
		);
	const unit = formula.unit === 'as inputs' ? measure.unit : formula.unit;
	return good({
		value: roundTo(convert(raw, unit, measure.unit), measure.decimals),
		unit: measure.unit,
		formula: formula.name,
		formulaText: formula.text,
		source: formula.source,
		inputs: values
	});
}

/** What an input needs; where the formula takes what it is given, in the unit of the measure. */
function neededFor(measure: DerivedMeasure, formula: Formula, name: string): FormulaInput {
	const needed = formula.inputs[name];
	return needed && formula.unit !== 'as inputs'
		? needed
		: { kind: 'number', unit: measure.unit, name: needed?.name ?? name };
}

function baselineValue(
	needed: FormulaInput,
	reference: string,
	context: DeriveContext
): number | null {
	if (context.baseline === undefined) return null;
	const measures = context.baseline === 'here' ? context.measures : context.baseline;
	const found = inputValue(needed, reference, { ...context, measures });
	return typeof found === 'number' ? found : null;
}

function inputValue(
	needed: FormulaInput,
	reference: string,
	context: DeriveContext
): number | string | null {
	const colon = reference.indexOf(':');
	const [kind, key] = [reference.slice(0, colon), reference.slice(colon + 1)];
	if (kind === 'age') {
		const born = context.characteristics[key];
		// A birth date known in part gives no completed years.
		const date = typeof born === 'string' ? findPlainDate(born) : null;
		if (date === null || needed.kind !== 'age') return null;
		const age = ageInYears(date, context.on, context.leapBirthday);
		return age >= 0 ? age : null;
	}
	const found = kind === 'measure' ? context.measures[key] : context.characteristics[key];
	if (found === null || found === undefined) return null;
	if (needed.kind === 'choice')
		return typeof found === 'string' && needed.choices.includes(found) ? found : null;
	if (needed.kind !== 'number' || typeof found !== 'object') return null;
	return converts(found.unit, needed.unit, needed.analyte)
		? convert(found.value, found.unit, needed.unit, needed.analyte)
		: null;
}

/**
 * All derived measures of a visit, those first that others need. Values worked out here count as inputs of the next.
 */
export function deriveAll(
	definition: Pick<StudyDefinition, 'measures'>,
	keys: readonly string[],
	context: DeriveContext
): Map<string, Result<Derived, DeriveProblem>> {
	const byKey = new Map(definition.measures.map((measure) => [measure.key, measure]));
	const results = new Map<string, Result<Derived, DeriveProblem>>();
	const measures = { ...context.measures };

	function work(measure: Measure, above: readonly string[]): void {
		if (measure.kind !== 'derived' || results.has(measure.key) || above.includes(measure.key))
			return;
		for (const reference of Object.values(measure.derivedBy.inputs)) {
			const source =
				reference.startsWith('measure:') && byKey.get(reference.slice('measure:'.length));
			if (source) work(source, [...above, measure.key]);
		}
		const result = derive(measure, { ...context, measures });
		results.set(measure.key, result);
		measures[measure.key] = result.ok ? result.value : null;
	}

	for (const key of keys) {
		const measure = byKey.get(key);
		if (measure) work(measure, []);
	}
	return results;
}
