import { readFileSync, writeFileSync } from 'node:fs';
import { resolve } from 'node:path';
import { describe, expect, it } from 'vitest';
import { format } from 'prettier';
import { plainDateOf } from '../../time/dates';
import { checkDefinition, mayPublish } from './check';
import { definitionJsonSchema, measuresAt, type StudyDefinition } from './definition';
import { placeOf, placeText } from './finding-place';
import { readDefinition, readTemplate } from './template';

const folder = resolve('templates/studies');
const file = (name: string) => readFileSync(`${folder}/${name}`, 'utf8');

function definitionOf(name: string): StudyDefinition {
	const read = readTemplate(file(name));
	if (!read.ok) throw new Error(JSON.stringify(read.problems, null, 1));
	return read.definition;
}

const trial = () => definitionOf('two-arm-trial.json');
const cohort = () => definitionOf('single-arm-cohort.json');

const codes = (definition: StudyDefinition, weight?: 'stops' | 'warns') =>
	checkDefinition(definition)
		.filter((finding) => !weight || finding.weight === weight)
		.map((finding) => finding.problem.code);

describe('templates', () => {
	it.each([
		'two-arm-trial.json',
		'three-arm-open-trial.json',
		'single-arm-cohort.json',
		'run-in-stepped-schedule.json'
	])('%s reads and may be published', (name) => {
		const findings = checkDefinition(definitionOf(name));
		expect(findings).toEqual([]);
		expect(mayPublish(findings)).toBe(true);
	});

	it('the trial has nine visits over 24 months in two masked arms', () => {
		const definition = trial();
		expect(definition.visits).toHaveLength(9);
		expect(definition.visits.at(-1)?.target).toEqual({ amount: 24, unit: 'month' });
		expect(definition.masked).toBe(true);
		expect(definition.arms).toHaveLength(2);
		expect(measuresAt(definition, 'baseline').map((measure) => measure.key)).toContain('egfr');
	});

	it('the published schema is the one the program reads by', async () => {
		const made = await format(JSON.stringify(definitionJsonSchema()), {
			parser: 'json',
			useTabs: true,
			printWidth: 100
		});
		// `HEDDLE_WRITE_SCHEMA=1` writes it anew after a change of the definition.
		if (process.env.HEDDLE_WRITE_SCHEMA)
			writeFileSync(`${folder}/study-definition.schema.json`, made);
		expect(JSON.parse(file('study-definition.schema.json'))).toEqual(JSON.parse(made));
	});
});

describe('reading a definition', () => {
	it('says where and what, in sentences', () => {
		const value = JSON.parse(file('two-arm-trial.json'));
		value.visits[2].target.amount = 'one';
		value.visits[3].colour = 'red';
		delete value.measures[0].unit;
		value.sites[0].zone = 'Mars/Olympus';
		value.consentVersions[0].from = '2026-02-30';
		value.measures[1].kind = 'guessed';
		value.arms[0].key = 'Arm A';
		const read = readDefinition({ ...value, $schema: undefined });
		if (read.ok) throw new Error('read');
		const found = Object.fromEntries(
			read.problems.map((each) => [each.path, each.problem.message])
		);
		expect(found['visits[2].target.amount']).toBe('This must be a number.');
		expect(found['visits[3]']).toContain('no field called “colour”');
		expect(found['measures[0].unit']).toContain('must be one of');
		expect(found['sites[0].zone']).toContain('Europe/Berlin');
		expect(found['consentVersions[0].from']).toContain('day that exists');
		expect(found['measures[1].kind']).toBe('The kind given here is not known.');
		expect(found['arms[0].key']).toContain('lower-case letters');
	});

	it('refuses what is not JSON, not an object, or empty', () => {
		for (const text of ['', '{', 'null', '[]', '7', '{}']) {
			const read = readTemplate(text);
			expect(read.ok, text).toBe(false);
			if (!read.ok) expect(read.problems.length).toBeGreaterThan(0);
		}
		const empty = readTemplate('{}');
		if (!empty.ok) expect(empty.problems.map((each) => each.path)).toContain('visits');
	});

	it('never throws on rubbish, and caps what it lists', () => {
		for (const value of [
			undefined,
			0,
			'x',
			[],
			{ visits: 7, measures: null, schedule: { A: [1] } }
		])
			expect(readDefinition(value).ok).toBe(false);
		const many = {
			...JSON.parse(file('two-arm-trial.json')),
			visits: Array(100).fill({ a: 1, b: 2, c: 3 })
		};
		const read = readDefinition(many);
		if (read.ok) throw new Error('read');
		expect(read.problems.length).toBeLessThanOrEqual(200);
	});

	it('refuses control characters and numbers out of bounds', () => {
		const base = JSON.parse(file('single-arm-cohort.json'));
		delete base.$schema;
		for (const name of ['a\u0000b', 'a\nb', 'a\u0085b', '   '])
			expect(readDefinition({ ...base, name }).ok, JSON.stringify(name)).toBe(false);
		for (const plannedSubjects of [0, 1.5, -3, 1e9, NaN, Infinity])
			expect(readDefinition({ ...base, plannedSubjects }).ok).toBe(false);
	});
});

describe('checking before publishing', () => {
	const change = (make: () => StudyDefinition, edit: (draft: StudyDefinition) => void) => {
		const draft = structuredClone(make());
		edit(draft);
		return draft;
	};
	const measure = (draft: StudyDefinition, key: string) => {
		const found = draft.measures.find((each) => each.key === key);
		if (!found) throw new Error(key);
		return found as StudyDefinition['measures'][number] & Record<string, unknown>;
	};
	const visit = (draft: StudyDefinition, key: string) => {
		const found = draft.visits.find((each) => each.key === key);
		if (!found) throw new Error(key);
		return found;
	};

	const day = plainDateOf;
	/** The eGFR becomes the change, in kilograms, of another measure. */
	const changeOf = (draft: StudyDefinition, key: string) =>
		Object.assign(measure(draft, 'egfr'), {
			unit: 'kg',
			derivedBy: { formula: 'change-from-baseline', inputs: { value: `measure:${key}` } }
		});

	it.each<[string, (draft: StudyDefinition) => void]>([
		['ARMS_TOO_FEW', (d) => d.arms.pop()],
		['ANCHOR_WITHOUT_ARMS', (d) => d.arms.pop()],
		['STRATA_WITHOUT_ARMS', (d) => d.arms.pop()],
		['KEY_TWICE', (d) => void (visit(d, 'month-3').key = 'month-1')],
		['KEY_TWICE', (d) => void (d.strata[0]!.levels[1]!.key = 'below-45')],
		['ANCHOR_UNKNOWN', (d) => void (visit(d, 'month-3').anchor = 'visit:month-2')],
		[
			'ANCHOR_CYCLE',
			(d) => {
				visit(d, 'month-3').anchor = 'visit:month-6';
				visit(d, 'month-6').anchor = 'visit:month-3';
			}
		],
		['ANCHOR_SELF', (d) => void (visit(d, 'month-3').anchor = 'visit:month-3')],
		['VISIT_TOO_LONG', (d) => void (visit(d, 'month-3').lengthMinutes = 721)],
		['STRATA_TOO_MANY', (d) => void (d.plannedSubjects = 3)],
		['LEVEL_TWICE', (d) => void (d.strata[0]!.levels[1]!.name = 'below 45 mL/min/1.73 m²')],
		['LEVEL_NOT_A_CHOICE', (d) => void (d.strata[0]!.key = 'sex')],
		[
			'CLOSURE_INSIDE_OUT',
			(d) =>
				void (d.sites[0]!.closures = [
					{ from: day('2026-08-14'), to: day('2026-08-03'), reason: 'Summer' }
				])
		],
		['MINORS_INSIDE_OUT', (d) => void (d.minors = { majority: 16, assentFrom: 16 })],
		[
			'PLAN_SITE_UNKNOWN',
			(d) =>
				void (d.enrolmentPlan = {
					from: '2026-06',
					months: 12,
					sites: [{ site: '09', subjects: 240 }]
				})
		],
		[
			'BASELINE_OF_CHANGE',
			(d) => {
				changeOf(d, 'weight');
				d.schedule.baseline = d.schedule.baseline!.filter((each) => each !== 'weight');
			}
		],
		[
			'BASELINE_OF_CHANGE_LATER',
			(d) => {
				changeOf(d, 'weight');
				d.baselineVisit = 'month-6';
			}
		],
		[
			'FORMULA_INPUT_KIND',
			(d) => {
				changeOf(d, 'potassium');
			}
		],
		['WINDOW_MONTHS', (d) => void (visit(d, 'week-2').after = { amount: 1, unit: 'month' })],
		['WINDOWS_OVERLAP', (d) => void (visit(d, 'week-2').after = { amount: 9, unit: 'day' })],
		[
			'VISITS_OUT_OF_ORDER',
			(d) => void (visit(d, 'month-3').target = { amount: 10, unit: 'month' })
		],
		['VISIT_UNKNOWN', (d) => void (d.schedule['month-2'] = ['creatinine'])],
		['VISIT_UNKNOWN', (d) => void (d.baselineVisit = 'month-2')],
		['MEASURE_UNKNOWN', (d) => void d.schedule['month-3']!.push('haemoglobin')],
		['MEASURE_UNKNOWN', (d) => void (d.primaryMeasure = 'haemoglobin')],
		['MEASURE_LISTED_TWICE', (d) => void d.schedule['month-3']!.push('weight')],
		[
			'MEASURE_NEVER_SCHEDULED',
			(d) => {
				for (const key in d.schedule)
					d.schedule[key] = d.schedule[key]!.filter((each) => each !== 'weight');
			}
		],
		[
			'PRIMARY_NOT_AT_BASELINE',
			(d) => void (d.schedule.baseline = d.schedule.baseline!.filter((each) => each !== 'egfr'))
		],
		[
			'PRIMARY_ONCE',
			(d) => {
				for (const key in d.schedule)
					if (key !== 'baseline')
						d.schedule[key] = d.schedule[key]!.filter((each) => each !== 'egfr');
			}
		],
		['LIMITS_INSIDE_OUT', (d) => void (measure(d, 'potassium').hardLow = 12)],
		['LIMITS_INSIDE_OUT', (d) => void (measure(d, 'potassium').softHigh = 3)],
		['LIMITS_SOFT_OUTSIDE_HARD', (d) => void (measure(d, 'potassium').softHigh = 11)],
		['LIMITS_SOFT_OUTSIDE_HARD', (d) => void (measure(d, 'potassium').softLow = 1)],
		['UNIT_DOES_NOT_CONVERT', (d) => void (measure(d, 'weight').alsoIn = ['cm'])],
		['UNIT_DOES_NOT_CONVERT', (d) => void (measure(d, 'potassium').alsoIn = ['mg/dL'])],
		['READINGS_TOO_FEW', (d) => void (measure(d, 'systolic').readingsNeeded = 4)],
		[
			'FORMULA_INPUT_MISSING',
			(d) => void (measure(d, 'egfr').derivedBy = { formula: 'bmi', inputs: {} })
		],
		[
			'FORMULA_INPUT_KIND',
			(d) => {
				const derived = measure(d, 'egfr');
				if (derived.kind === 'derived') derived.derivedBy.inputs.creatinine = 'measure:weight';
			}
		],
		[
			'FORMULA_INPUT_UNKNOWN',
			(d) => {
				const derived = measure(d, 'egfr');
				if (derived.kind === 'derived') derived.derivedBy.inputs.cystatin = 'measure:weight';
			}
		],
		[
			'FORMULA_CYCLE',
			(d) =>
				void (measure(d, 'egfr').derivedBy = { formula: 'mean', inputs: { first: 'measure:egfr' } })
		],
		[
			'CHARACTERISTIC_UNKNOWN',
			(d) => void (d.characteristics = d.characteristics.filter((each) => each.key !== 'sex'))
		],
		[
			'FORMULA_INPUT_KIND',
			(d) => {
				const sex = d.characteristics[0];
				if (sex?.kind === 'choice') sex.choices[0]!.key = 'woman';
			}
		],
		[
			'FORMULA_INPUT_NOT_AT_VISIT',
			(d) =>
				void (d.schedule['month-3'] = d.schedule['month-3']!.filter(
					(each) => each !== 'creatinine'
				))
		],
		['OPENING_HOURS_INSIDE_OUT', (d) => void (d.sites[0]!.openingHours[0]!.closes = '07:00')],
		['OPENING_HOURS_OVERLAP', (d) => void (d.sites[0]!.openingHours[1]!.opens = '12:00')],
		['SITES_MISSING', (d) => void (d.sites = [])],
		['CONSENT_VERSION_MISSING', (d) => void (d.consentVersions = [])],
		[
			'UNIT_DOES_NOT_CONVERT',
			(d) => void (d.comparisons = [{ lower: 'weight', higher: 'systolic' }])
		]
	])('%s stops a draft', (code, edit) => {
		const draft = change(trial, edit);
		expect(codes(draft, 'stops')).toContain(code);
		expect(mayPublish(checkDefinition(draft))).toBe(false);
	});

	it.each<[string, (draft: StudyDefinition) => void]>([
		[
			'WINDOW_ONE_DAY',
			(d) =>
				Object.assign(visit(d, 'month-6'), {
					before: { amount: 0, unit: 'day' },
					after: { amount: 0, unit: 'day' }
				})
		],
		['VISIT_WITHOUT_MEASURES', (d) => void (d.schedule['month-6'] = [])],
		[
			'LIMITS_MISSING',
			(d) => Object.assign(measure(d, 'weight'), { hardLow: undefined, hardHigh: undefined })
		],
		[
			'PLAN_DIFFERS',
			(d) =>
				void (d.enrolmentPlan = {
					from: '2026-06',
					months: 12,
					sites: [{ site: '01', subjects: 7 }]
				})
		],
		[
			'MINORS_WITHOUT_BIRTH_DATE',
			(d) => {
				d.minors = { majority: 18, assentFrom: 7 };
				d.characteristics = d.characteristics.filter((each) => each.kind !== 'birth-date');
			}
		],
		['ELIGIBILITY_MISSING', (d) => void (d.eligibility = [])],
		['OPENING_HOURS_MISSING', (d) => void (d.sites[0]!.openingHours = [])],
		['OPENING_HOURS_TOO_SHORT', (d) => void (visit(d, 'baseline').lengthMinutes = 400)]
	])('%s warns and lets a draft be published', (code, edit) => {
		const draft = change(cohort, edit);
		expect(codes(draft, 'warns')).toContain(code);
		expect(mayPublish(checkDefinition(draft))).toBe(true);
	});

	it('thin strata and a site that enrols nobody are for a person to weigh; minimisation has no strata to fill', () => {
		const draft = change(trial, (d) => {
			d.plannedSubjects = 15;
			d.enrolmentPlan = {
				from: '2026-06',
				months: 12,
				sites: [
					{ site: '01', subjects: 15 },
					{ site: '02', subjects: 0 }
				]
			};
		});
		expect(codes(draft, 'warns')).toEqual(['STRATUM_SITE_EMPTY', 'STRATA_THIN']);
		draft.allocation = { method: 'minimisation' };
		draft.plannedSubjects = 3;
		expect(codes(draft)).not.toContain('STRATA_TOO_MANY');
	});

	it('what the limits of a definition rule out is refused with what is allowed', () => {
		const read = readDefinition(
			change(trial, (d) => {
				d.arms[0]!.ratio = 0;
				visit(d, 'month-3').after = { amount: 2000, unit: 'day' };
				d.measures = Array.from({ length: 400 }, (_, at) => ({
					...d.measures[0]!,
					key: `measure-${at}`
				}));
			})
		);
		if (read.ok) throw new Error('read');
		expect(Object.fromEntries(read.problems.map((p) => [p.path, p.problem.message]))).toEqual({
			'arms[0].ratio': 'Give a number from 1 to 10.',
			'visits[3].after.amount': 'Give a number from 0 to 366.',
			measures: 'At most 200 allowed here.'
		});
	});

	it('every finding has its place: a part of set-up, the item, and the field that takes the focus', () => {
		const place = (edit: (draft: StudyDefinition) => void, code: string) => {
			const draft = change(trial, edit);
			const found = checkDefinition(draft).find(({ problem }) => problem.code === code);
			if (!found) throw new Error(code);
			return placeText(placeOf(found, draft));
		};
		expect(
			place((d) => void (visit(d, 'week-2').after = { amount: 9, unit: 'day' }), 'WINDOWS_OVERLAP')
		).toBe('visits?item=month-1&field=before');
		expect(place((d) => void (visit(d, 'month-3').anchor = 'visit:month-3'), 'ANCHOR_SELF')).toBe(
			'visits?item=month-3&field=anchor'
		);
		expect(place((d) => void (measure(d, 'potassium').softHigh = 3), 'LIMITS_INSIDE_OUT')).toBe(
			'measures?item=potassium&field=softLow'
		);
		expect(place((d) => void (d.schedule['month-6'] = []), 'VISIT_WITHOUT_MEASURES')).toBe(
			'schedule?list=visits&item=month-6'
		);
		expect(place((d) => void (d.baselineVisit = 'none'), 'VISIT_UNKNOWN')).toBe(
			'study?field=baselineVisit'
		);
		expect(place((d) => void (d.sites[1]!.openingHours = []), 'OPENING_HOURS_MISSING')).toBe(
			'sites?item=02&field=openingHours'
		);
		expect(place((d) => void (d.consentVersions = []), 'CONSENT_VERSION_MISSING')).toBe(
			'eligibility?field=consentVersions'
		);
		expect(place((d) => void (d.strata[0]!.key = 'sex'), 'LEVEL_NOT_A_CHOICE')).toBe(
			'arms?list=strata&item=sex&field=levels'
		);
	});

	it('finds an overlap that only short months bring out', () => {
		// Four weeks and one month are three days apart in long months and the same day from a 28-day February.
		const draft = change(cohort, (d) => {
			Object.assign(visit(d, 'month-6'), {
				target: { amount: 4, unit: 'week' },
				before: { amount: 1, unit: 'day' },
				after: { amount: 1, unit: 'day' }
			});
			Object.assign(visit(d, 'month-12'), {
				target: { amount: 1, unit: 'month' },
				before: { amount: 1, unit: 'day' },
				after: { amount: 1, unit: 'day' }
			});
		});
		const found = checkDefinition(draft).filter((each) =>
			['WINDOWS_OVERLAP', 'VISITS_OUT_OF_ORDER'].includes(each.problem.code)
		);
		expect(found.map((each) => each.path)).toContain('visits[2]');
	});
});
