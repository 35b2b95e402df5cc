import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import { plainDateOf } from '../../time/dates';
import { roundTo } from '../../units/convert';
import type { DerivedMeasure, Measure, NumberMeasure } from '../study/definition';
import { assess, type Entry } from './assess';
import { checkComparisons } from './compare';
import { decimalOf, readDecimal } from './decimal';
import { derive, deriveAll, type DeriveContext } from './derive';
import { formulas } from './formulas';
import { summarise } from './summary';

const today = plainDateOf('2026-06-09');
const notDoneReasons = ['Declined'];
const creatinine: NumberMeasure = {
	key: 'creatinine',
	name: 'Creatinine',
	kind: 'number',
	showLast: 'after',
	unit: 'umol/L',
	decimals: 0,
	alsoIn: ['mg/dL'],
	analyte: 'creatinine',
	hardLow: 20,
	hardHigh: 1500,
	softLow: 45,
	softHigh: 300,
	notDoneReasons
};
const weight: NumberMeasure = {
	key: 'weight',
	name: 'Weight',
	kind: 'number',
	showLast: 'after',
	unit: 'kg',
	decimals: 1,
	alsoIn: ['[lb_av]'],
	hardLow: 20,
	hardHigh: 350,
	softChange: { from: 'last', by: 'percent', size: 10 },
	notDoneReasons
};
const systolic: NumberMeasure = {
	key: 'systolic',
	name: 'Systolic pressure',
	kind: 'repeated',
	showLast: 'after',
	unit: 'mm[Hg]',
	decimals: 0,
	readings: 3,
	readingsNeeded: 2,
	summary: 'mean',
	summaryDecimals: 1,
	hardLow: 40,
	hardHigh: 300,
	softLow: 90,
	softHigh: 180,
	notDoneReasons
};

const code = (measure: Measure, entry: Entry, last?: number) => {
	const found = assess(measure, entry, { today, last });
	if (found.result === 'refused') return found.problem.code;
	return found.result === 'ask' ? found.problems.map((each) => each.code).join() : 'ok';
};
const value = (text: string | number, unit?: string): Entry => ({
	kind: 'value',
	value: text,
	unit
});
const readings = (...values: (string | number)[]): Entry => ({ kind: 'readings', values });

describe('typed numbers', () => {
	it.each([
		['118', 118, 0],
		[' 118.50 ', 118.5, 2],
		['118,5', 118.5, 1],
		['−3', -3, 0],
		['+3.', 3, 0],
		['-0', 0, 0]
	])('%s is read', (text, number, decimals) => {
		expect(readDecimal(text)).toEqual({ value: number, decimals });
	});

	it.each([
		'',
		'1e3',
		'0x10',
		'1 000',
		'1,000.5',
		'1.2.3',
		'NaN',
		'Infinity',
		'٣',
		'.5',
		'1'.repeat(16),
		'--1',
		'12kg'
	])('%s is no number', (text) => {
		expect(readDecimal(text)).toBeNull();
	});

	it('knows the decimals of a number that a program sends', () => {
		expect(decimalOf(1.25)).toEqual({ value: 1.25, decimals: 2 });
		expect(decimalOf(1e-7)).toEqual({ value: 1e-7, decimals: 7 });
		expect(decimalOf(1e21)?.decimals).toBe(0);
		expect(decimalOf(NaN)).toBeNull();
		expect(decimalOf(-Infinity)).toBeNull();
	});
});

describe('assessing an entry', () => {
	it.each<[string | number, string]>([
		['118', 'ok'],
		['20', 'SOFT_LIMIT'],
		['19', 'HARD_LIMIT'],
		['1500', 'SOFT_LIMIT'],
		['1501', 'HARD_LIMIT'],
		['45', 'ok'],
		['44', 'SOFT_LIMIT'],
		['300', 'ok'],
		['301', 'SOFT_LIMIT'],
		['118.5', 'TOO_MANY_DECIMALS'],
		['118.0', 'TOO_MANY_DECIMALS'],
		['', 'VALUE_MISSING'],
		['  ', 'VALUE_MISSING'],
		['abc', 'NOT_A_NUMBER'],
		['🙂', 'NOT_A_NUMBER'],
		['1\u00000', 'NOT_A_NUMBER'],
		[NaN, 'NOT_A_NUMBER'],
		[Infinity, 'NOT_A_NUMBER'],
		[1e300, 'HARD_LIMIT'],
		[118, 'ok']
	])('creatinine of %s: %s', (text, expected) => {
		expect(code(creatinine, value(text))).toBe(expected);
	});

	it('the sentence of a soft limit names the value and no limit', () => {
		const found = assess(creatinine, value('301'), { today });
		if (found.result !== 'ask') throw new Error(found.result);
		expect(found.value).toMatchObject({ kind: 'number', value: 301, unit: 'umol/L' });
		expect(found.problems[0]?.message).toContain('301 µmol/L');
		expect(JSON.stringify(found.problems)).not.toMatch(/300|45\b/);
	});

	it('the sentence of a hard limit names what is accepted', () => {
		const found = assess(creatinine, value('1501'), { today });
		if (found.result !== 'refused') throw new Error(found.result);
		expect(found.problem.message).toBe(
			'1501 µmol/L is outside what this study accepts (20 to 1500 µmol/L). Check the unit and the decimal point.'
		);
	});

	it('converts another accepted unit and keeps what was typed', () => {
		// 1.0 mg/dL of creatinine is 88.4 µmol/L (113.12 g/mol).
		expect(assess(creatinine, value('1.0', 'mg/dL'), { today })).toEqual({
			result: 'ok',
			value: {
				kind: 'number',
				value: 88,
				unit: 'umol/L',
				entered: { texts: ['1.0'], unit: 'mg/dL' }
			}
		});
		expect(assess(weight, value('150', '[lb_av]'), { today })).toMatchObject({
			value: { value: 68 }
		});
		for (const unit of ['mmol/L', 'kg', 'toString', ''])
			expect(code(creatinine, value('100', unit))).toBe('UNIT_NOT_ACCEPTED');
	});

	it('asks about a large change from the last value', () => {
		expect(code(weight, value('88.0'), 80)).toBe('ok');
		expect(code(weight, value('88.1'), 80)).toBe('SOFT_CHANGE');
		expect(code(weight, value('72.0'), 80)).toBe('ok');
		expect(code(weight, value('71.9'), 80)).toBe('SOFT_CHANGE');
		expect(code(weight, value('88.1'))).toBe('ok');
		const fromBaseline = {
			...weight,
			softChange: { from: 'baseline', by: 'amount', size: 2 }
		} as const;
		expect(assess(fromBaseline, value('83'), { today, last: 83, baseline: 80 }).result).toBe('ask');
		expect(assess(fromBaseline, value('82'), { today, last: 70, baseline: 80 }).result).toBe('ok');
	});

	it('counts per cent on the log scale where the measure says so: half is as far as double', () => {
		const doubling = {
			...weight,
			hardLow: 1,
			softLow: undefined,
			softHigh: undefined,
			softChange: { from: 'last', by: 'percent', size: 100 }
		} as const;
		const logged = { ...doubling, scale: 'log' } as const;
		for (const [text, linear, log] of [
			['200.0', 'ok', 'ok'],
			['200.1', 'SOFT_CHANGE', 'SOFT_CHANGE'],
			['50.0', 'ok', 'ok'],
			['49.9', 'ok', 'SOFT_CHANGE']
		]) {
			expect(code(doubling, value(text as string), 100), text).toBe(linear);
			expect(code(logged, value(text as string), 100), text).toBe(log);
		}
	});

	it('summarises repeated readings and looks at each of them', () => {
		expect(assess(systolic, readings('132', '128', '131'), { today })).toMatchObject({
			result: 'ok',
			value: { value: 130.3, readings: [132, 128, 131] }
		});
		expect(assess(systolic, readings('132', '', '128'), { today })).toMatchObject({
			value: { value: 130 }
		});
		expect(code(systolic, readings('132', '', ''))).toBe('READINGS_WRONG');
		expect(code(systolic, readings('132', '130', '131', '130'))).toBe('READINGS_WRONG');
		expect(code(systolic, readings('', ''))).toBe('VALUE_MISSING');
		expect(code(systolic, readings('132', '301', '130'))).toBe('HARD_LIMIT');
		expect(code(systolic, readings('80', '110', '110'))).toBe('SOFT_LIMIT');
		expect(code(systolic, value('130'))).toBe('READINGS_WRONG');
		expect(code(creatinine, readings('130', '131'))).toBe('READINGS_WRONG');
	});

	it('not done needs a reason from the list', () => {
		expect(code(creatinine, { kind: 'not done', reason: 'Declined' })).toBe('ok');
		for (const reason of ['', 'because', 'declined'])
			expect(code(creatinine, { kind: 'not done', reason })).toBe('NOT_DONE_REASON');
	});

	it('choices, dates and texts', () => {
		const base = { key: 'x', name: 'X', showLast: 'never', notDoneReasons } as const;
		const choice: Measure = {
			...base,
			kind: 'choice',
			choices: [
				{ key: 'yes', name: 'Yes' },
				{ key: 'no', name: 'No' }
			]
		};
		const date: Measure = { ...base, kind: 'date', future: false };
		const text: Measure = { ...base, kind: 'text', maxLength: 10 };
		expect(code(choice, value('yes'))).toBe('ok');
		for (const wrong of ['Yes', 'maybe', '__proto__'])
			expect(code(choice, value(wrong))).toBe('NOT_A_CHOICE');
		expect(code(date, value('2026-06-09'))).toBe('ok');
		expect(code(date, value('2026-06-10'))).toBe('DATE_IN_FUTURE');
		expect(code({ ...date, future: true }, value('2026-06-10'))).toBe('ok');
		expect(code(date, value('2026-02-30'))).toBe('DATE_NOT_REAL');
		expect(code(date, value('9 June 2026'))).toBe('DATE_SHAPE');
		expect(code(text, value('🙂'.repeat(10)))).toBe('ok');
		expect(code(text, value('x'.repeat(11)))).toBe('TEXT_TOO_LONG');
		for (const wrong of ['a\u0000', 'a\u0007', '\ud800'])
			expect(code(text, value(wrong))).toBe('TEXT_NOT_ALLOWED');
		expect(assess(text, value('e\u0301'), { today })).toMatchObject({ value: { value: 'é' } });
	});

	it('never keeps a number outside the hard limits, whatever is typed', () => {
		fc.assert(
			fc.property(fc.oneof(fc.string(), fc.double(), fc.integer()), (typed) => {
				const found = assess(creatinine, value(typed), { today });
				if (found.result !== 'refused' && found.value.kind === 'number') {
					expect(found.value.value).toBeGreaterThanOrEqual(20);
					expect(found.value.value).toBeLessThanOrEqual(1500);
				}
			})
		);
	});
});

describe('summaries', () => {
	it('follow their rule', () => {
		expect(summarise([140, 130, 132], 'mean')).toBe(134);
		expect(summarise([140, 130, 132], 'mean-without-first')).toBe(131);
		expect(summarise([140], 'mean-without-first')).toBe(140);
		expect(summarise([140, 130, 132], 'median')).toBe(132);
		expect(summarise([140, 130], 'median')).toBe(135);
		expect(summarise([140, 130, 132], 'last')).toBe(132);
		expect(() => summarise([], 'mean')).toThrow(RangeError);
	});
});

describe('comparisons', () => {
	const definition = {
		measures: [systolic, { ...systolic, key: 'diastolic', name: 'Diastolic pressure' }],
		comparisons: [{ lower: 'diastolic', higher: 'systolic' }]
	};
	const mmHg = (number: number) => ({ value: number, unit: 'mm[Hg]' as const });

	it('a diastolic pressure must be below the systolic', () => {
		expect(checkComparisons(definition, { diastolic: mmHg(80), systolic: mmHg(130) })).toEqual([]);
		const [found] = checkComparisons(definition, { diastolic: mmHg(130), systolic: mmHg(130) });
		expect(found?.measures).toEqual(['diastolic', 'systolic']);
		expect(found?.problem.message).toBe(
			'Diastolic pressure must be below Systolic pressure: 130.0 mmHg and 130.0 mmHg.'
		);
		expect(checkComparisons(definition, { diastolic: mmHg(200), systolic: null })).toEqual([]);
		const [pair] = definition.comparisons;
		const equal = {
			...definition,
			comparisons: [
				{ lower: '', higher: '', ...pair, orEqual: true as const, weight: 'soft' as const }
			]
		};
		const same = { diastolic: mmHg(130), systolic: mmHg(130) };
		expect(checkComparisons(equal, same)).toEqual([]);
		expect(checkComparisons(equal, { ...same, systolic: mmHg(129) })).toMatchObject([
			{ weight: 'soft', problem: { code: 'COMPARISON_ABOVE' } }
		]);
	});
});

describe('derived values', () => {
	const derived = (
		formula: DerivedMeasure['derivedBy']['formula'],
		inputs: Record<string, string>,
		unit: DerivedMeasure['unit'],
		decimals: number
	): DerivedMeasure => ({
		key: 'derived',
		name: 'Derived',
		kind: 'derived',
		showLast: 'never',
		unit,
		decimals,
		derivedBy: { formula, inputs }
	});
	const egfr = derived(
		'egfr-ckd-epi-2021',
		{ creatinine: 'measure:creatinine', age: 'age:birth-date', sex: 'characteristic:sex' },
		'mL/min/{1.73_m2}',
		1
	);
	const person = (sex: string, age: number, mgDl: number): DeriveContext => ({
		on: today,
		measures: { creatinine: { value: mgDl, unit: 'mg/dL' } },
		characteristics: { sex, 'birth-date': `${2026 - age}-01-01` }
	});
	const outcome = (measure: DerivedMeasure, context: DeriveContext) => {
		const found = derive(measure, context);
		return found.ok ? found.value.value : found.problem.code;
	};

	// Inker et al. 2021, equation for creatinine; values computed by hand from the published equation.
	it.each<[string, number, number, number]>([
		['female', 55, 0.9, 75.5],
		['female', 40, 0.8, 95.5],
		['female', 65, 2.0, 27.2],
		['female', 30, 0.7, 119.2],
		['male', 50, 1.0, 91.7],
		['male', 70, 1.5, 49.8],
		['male', 40, 0.7, 119.5],
		['female', 25, 0.5, 133.4]
	])('CKD-EPI 2021: %s of %i with %d mg/dL is %d', (sex, age, mgDl, expected) => {
		expect(outcome(egfr, person(sex, age, mgDl))).toBe(expected);
		const molar = person(sex, age, mgDl);
		expect(
			outcome(egfr, { ...molar, measures: { creatinine: { value: mgDl * 88.4, unit: 'umol/L' } } })
		).toBe(expected);
	});

	it('CKD-EPI 2021 is for adults, and needs everything', () => {
		expect(outcome(egfr, person('female', 17, 0.9))).toBe('DERIVED_OUT_OF_SCOPE');
		expect(outcome(egfr, person('female', 40, 0))).toBe('DERIVED_OUT_OF_SCOPE');
		expect(outcome(egfr, person('unknown', 40, 0.9))).toBe('DERIVED_INPUT_ABSENT');
		expect(outcome(egfr, { ...person('female', 40, 0.9), measures: {} })).toBe(
			'DERIVED_INPUT_ABSENT'
		);
		expect(
			outcome(egfr, { ...person('female', 40, 0.9), characteristics: { sex: 'female' } })
		).toBe('DERIVED_INPUT_ABSENT');
		expect(
			outcome(egfr, {
				...person('female', 40, 0.9),
				characteristics: { sex: 'female', 'birth-date': '1986' }
			})
		).toBe('DERIVED_INPUT_ABSENT');
		expect(
			outcome(egfr, {
				...person('female', 40, 1),
				measures: { creatinine: { value: 1, unit: 'kg' } }
			})
		).toBe('DERIVED_INPUT_ABSENT');
	});

	it('says which formula, from where, and with which inputs', () => {
		const found = derive(egfr, person('male', 50, 1));
		if (!found.ok) throw new Error(found.problem.message);
		expect(found.value.source).toContain('2021;385:1737');
		expect(found.value.inputs).toEqual({ creatinine: 1, age: 50, sex: 'male' });
	});

	const body = (kg: number, cm: number): DeriveContext => ({
		on: today,
		measures: { weight: { value: kg, unit: 'kg' }, height: { value: cm, unit: 'cm' } },
		characteristics: {}
	});
	const inputs = { weight: 'measure:weight', height: 'measure:height' };

	// Mosteller 1987, √(cm·kg/3600), by hand.
	it.each([
		[180, 80, 2.0],
		[170, 70, 1.818],
		[160, 60, 1.633]
	])('body surface of %i cm and %i kg is %d m²', (cm, kg, expected) => {
		expect(outcome(derived('bsa-mosteller', inputs, 'm2', 3), body(kg, cm))).toBe(expected);
	});

	it('body mass index of 70 kg and 1.70 m is 24.22', () => {
		expect(outcome(derived('bmi', inputs, 'kg/m2', 2), body(70, 170))).toBe(24.22);
		expect(outcome(derived('bmi', inputs, 'kg/m2', 2), body(70, 0))).toBe('DERIVED_OUT_OF_SCOPE');
	});

	it('mean arterial pressure of 120 and 80 is 93.3', () => {
		const pressure = derived(
			'mean-arterial-pressure',
			{ systolic: 'measure:s', diastolic: 'measure:d' },
			'mm[Hg]',
			1
		);
		expect(
			outcome(pressure, {
				on: today,
				measures: { s: { value: 120, unit: 'mm[Hg]' }, d: { value: 80, unit: 'mm[Hg]' } },
				characteristics: {}
			})
		).toBe(93.3);
	});

	it('the mean takes any number of values, each in its own unit', () => {
		const mean = derived('mean', { first: 'measure:a', second: 'measure:b' }, 'cm', 1);
		expect(
			outcome(mean, {
				on: today,
				measures: { a: { value: 100, unit: 'cm' }, b: { value: 1.2, unit: 'm' } },
				characteristics: {}
			})
		).toBe(110);
	});

	it('a change from baseline is the difference in the measure’s own unit, none without a baseline, and nought there', () => {
		const change = derived('change-from-baseline', { value: 'measure:weight' }, 'kg', 1);
		const now = body(82.4, 180);
		const at = (value: number, unit: 'kg' | '[lb_av]'): DeriveContext => ({
			...now,
			baseline: { weight: { value, unit } }
		});
		expect(outcome(change, at(85, 'kg'))).toBe(-2.6);
		// 185 lb is 83.9 kg (1 lb = 0.45359237 kg, exact).
		expect(outcome(change, at(185, '[lb_av]'))).toBe(-1.5);
		expect(outcome(change, { ...now, baseline: {} })).toBe('DERIVED_INPUT_ABSENT');
		expect(outcome(change, now)).toBe('DERIVED_INPUT_ABSENT');
		expect(outcome(change, { ...now, baseline: 'here' })).toBe(0);
		expect(outcome(change, { ...at(85, 'kg'), measures: {} })).toBe('DERIVED_INPUT_ABSENT');
	});

	it('a change of temperature has no offset: from 98.6 °F to 38.0 °C is 1.0 °C or 1.8 °F', () => {
		const context: DeriveContext = {
			on: today,
			measures: { temperature: { value: 38, unit: 'Cel' } },
			baseline: { temperature: { value: 98.6, unit: '[degF]' } },
			characteristics: {}
		};
		const inputs = { value: 'measure:temperature' };
		expect(outcome(derived('change-from-baseline', inputs, 'Cel', 1), context)).toBe(1);
		expect(outcome(derived('change-from-baseline', inputs, '[degF]', 1), context)).toBe(1.8);
	});

	it('derived from derived, whatever the order', () => {
		const surface = { ...derived('bsa-mosteller', inputs, 'm2', 3), key: 'surface' };
		const twice = { ...derived('mean', { only: 'measure:surface' }, 'm2', 2), key: 'twice' };
		const all = deriveAll({ measures: [twice, surface] }, ['twice', 'surface'], body(80, 180));
		expect([...all.keys()]).toEqual(['surface', 'twice']);
		expect(all.get('twice')).toMatchObject({ ok: true, value: { value: 2 } });
		const circle = {
			...twice,
			key: 'circle',
			derivedBy: { formula: 'mean' as const, inputs: { only: 'measure:circle' } }
		};
		expect(deriveAll({ measures: [circle] }, ['circle'], body(80, 180)).get('circle')?.ok).toBe(
			false
		);
	});

	it('every formula names its source', () => {
		for (const formula of Object.values(formulas)) expect(formula.source.length).toBeGreaterThan(5);
		expect(
			roundTo(formulas['mean-arterial-pressure'].compute({ systolic: 120, diastolic: 80 }), 4)
		).toBe(93.3333);
	});
});
