import type { Analyte } from '../../units/convert';
import type { UnitCode } from '../../units/units';

/**
 * Published formulas for derived values. Each says where it comes from and in which units its inputs go in;
 * the caller converts. Computed for research: confirm against the protocol before anyone acts on a value.
 */
export type NumberInput = { kind: 'number'; unit: UnitCode; analyte?: Analyte; name: string };
export type ChoiceInput = { kind: 'choice'; choices: readonly string[]; name: string };
/** Completed years on the day of measurement. */
export type AgeInput = { kind: 'age'; name: string };
export type FormulaInput = NumberInput | ChoiceInput | AgeInput;
export type InputValues = Readonly<Record<string, number | string>>;

export type Formula = {
	name: string;
	source: string;
	text: string;
	unit: UnitCode | 'as inputs';
	inputs: Readonly<Record<string, FormulaInput>>;
	/** Takes any number of further inputs of the same unit under names of the study's choosing. */
	variadic?: boolean;
	/** Also takes the value that its input `value` had at the study’s baseline visit, under the name `baseline`. */
	fromBaseline?: boolean;
	/** Why the formula does not apply to these values, or null. */
	outOfScope?: (values: InputValues) => string | null;
	compute: (values: InputValues) => number;
};

const number = (values: InputValues, name: string): number => Number(values[name]);

export const formulas = {
	'egfr-ckd-epi-2021': {
		name: 'Estimated glomerular filtration rate, CKD-EPI 2021 (creatinine)',
		source: 'Inker LA et al. New England Journal of Medicine 2021;385:1737–1749.',
		text: '142 × min(S/κ, 1)^α × max(S/κ, 1)^−1.200 × 0.9938^age × 1.012 if female; S in mg/dL; κ 0.7 (female), 0.9 (male); α −0.241 (female), −0.302 (male); adults',
		unit: 'mL/min/{1.73_m2}',
		inputs: {
			creatinine: {
				kind: 'number',
				unit: 'mg/dL',
				analyte: 'creatinine',
				name: 'serum creatinine'
			},
			age: { kind: 'age', name: 'age' },
			sex: { kind: 'choice', choices: ['female', 'male'], name: 'sex' }
		},
		outOfScope: (v) => {
			if (number(v, 'age') < 18) return 'the formula is for adults of 18 years and over';
			return number(v, 'creatinine') > 0 ? null : 'the creatinine is not above zero';
		},
		compute: (v) => {
			const female = v.sex === 'female';
			const ratio = number(v, 'creatinine') / (female ? 0.7 : 0.9);
			const alpha = female ? -0.241 : -0.302;
			return (
				142 *
				Math.min(ratio, 1) ** alpha *
				Math.max(ratio, 1) ** -1.2 *
				0.9938 ** number(v, 'age') *
				(female ? 1.012 : 1)
			);
		}
	},
	bmi: {
		name: 'Body mass index',
		source: 'World Health Organization, Technical Report Series 894 (2000).',
		text: 'weight in kg ÷ (height in m)²',
		unit: 'kg/m2',
		inputs: {
			weight: { kind: 'number', unit: 'kg', name: 'weight' },
			height: { kind: 'number', unit: 'm', name: 'height' }
		},
		outOfScope: (v) => (number(v, 'height') > 0 ? null : 'the height is not above zero'),
		compute: (v) => number(v, 'weight') / number(v, 'height') ** 2
	},
	'bsa-mosteller': {
		name: 'Body surface area, Mosteller',
		source: 'Mosteller RD. New England Journal of Medicine 1987;317:1098.',
		text: '√(height in cm × weight in kg ÷ 3600)',
		unit: 'm2',
		inputs: {
			weight: { kind: 'number', unit: 'kg', name: 'weight' },
			height: { kind: 'number', unit: 'cm', name: 'height' }
		},
		outOfScope: (v) =>
			number(v, 'height') > 0 && number(v, 'weight') > 0
				? null
				: 'height and weight are not both above zero',
		compute: (v) => Math.sqrt((number(v, 'height') * number(v, 'weight')) / 3600)
	},
	'mean-arterial-pressure': {
		name: 'Mean arterial pressure',
		source: 'Common practice.',
		text: '(systolic + 2 × diastolic) ÷ 3',
		unit: 'mm[Hg]',
		inputs: {
			systolic: { kind: 'number', unit: 'mm[Hg]', name: 'systolic pressure' },
			diastolic: { kind: 'number', unit: 'mm[Hg]', name: 'diastolic pressure' }
		},
		compute: (v) => (number(v, 'systolic') + 2 * number(v, 'diastolic')) / 3
	},
	mean: {
		name: 'Mean',
		source: 'Arithmetic.',
		text: 'sum of the values ÷ how many there are',
		unit: 'as inputs',
		inputs: {},
		variadic: true,
		compute: (v) => {
			const all = Object.values(v).map(Number);
			return all.reduce((total, value) => total + value, 0) / all.length;
		}
	},
	'change-from-baseline': {
		name: 'Change from baseline',
		source: 'Arithmetic.',
		text: 'value at this visit − value at the baseline visit',
		unit: 'as inputs',
		inputs: { value: { kind: 'number', unit: '1', name: 'value' } },
		fromBaseline: true,
		compute: (v) => number(v, 'value') - number(v, 'baseline')
	}
} as const satisfies Record<string, Formula>;

export type FormulaKey = keyof typeof formulas;
export const formulaKeys = Object.keys(formulas) as [FormulaKey, ...FormulaKey[]];
export const formulaOf = (key: FormulaKey): Formula => formulas[key];
