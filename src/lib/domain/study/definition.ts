import { z } from 'zod';
import { analyteKeys } from '../../units/convert';
import { unitCodes, type UnitCode } from '../../units/units';
import { isPlainDate } from '../../time/dates';
import { isZone, minutesOfTime } from '../../time/zones';
import { formulaKeys } from '../measurement/formulas';

/**
 * A study as its protocol version says it. Keys are short stable words that stay the same from one version to the
 * next; names are what people read and may be reworded. Block sizes and seeds are not here: everyone at a site
 * may read a definition.
 */

const hasControl = (text: string) =>
	[...text].some(
		(character) => character < ' ' || (character >= '\u007f' && character <= '\u009f')
	);

const line = (most: number) =>
	z
		.string()
		.trim()
		.min(1, 'Give some text.')
		.max(most, `Use at most ${most} characters.`)
		.refine((text) => !hasControl(text), 'Use one line of plain text.');

export const keySchema = z
	.string()
	.max(40, 'Use at most 40 characters.')
	.regex(
		/^[a-z][a-z0-9]*(-[a-z0-9]+)*$/,
		'Use lower-case letters, digits and single hyphens, starting with a letter.'
	)
	.meta({ description: 'A short stable word: lower-case letters, digits, single hyphens.' });

const plainDate = z
	.string()
	.refine(isPlainDate, 'Give a day that exists, as year-month-day: 2026-06-09.')
	.meta({ format: 'date' });

const unit = z.enum(unitCodes).meta({ description: 'UCUM code of a unit that Heddle knows.' });
const finite = z.number().refine(Number.isFinite, 'Give a number.');
const whole = (least: number, most: number) =>
	z
		.number()
		.int('Give a whole number.')
		.min(least, `Give a number from ${least} to ${most}.`)
		.max(most, `Give a number from ${least} to ${most}.`);

const amount = z.strictObject({
	amount: whole(-1200, 1200),
	unit: z.enum(['day', 'week', 'month'])
});
const width = z.strictObject({ amount: whole(0, 366), unit: z.enum(['day', 'week', 'month']) });

const arm = z.strictObject({ key: keySchema, name: line(100), ratio: whole(1, 10) });

const named = z.strictObject({ key: keySchema, name: line(200) });

const stratum = z.strictObject({
	key: keySchema,
	name: line(100),
	levels: z.array(named).min(2).max(20)
});

const time = z
	.string()
	.refine((text) => minutesOfTime(text) !== null, 'Give a time on a 24-hour clock: 09:30.');

const siteCode = z.string().regex(/^\d{2}$/, 'A site code has two digits: 02.');

const site = z.strictObject({
	code: siteCode,
	name: line(100),
	zone: z
		.string()
		.refine(isZone, 'Give a time zone by its name: Europe/Berlin.')
		.meta({ description: 'IANA time zone name.' }),
	openingHours: z
		.array(z.strictObject({ weekday: whole(1, 7), opens: time, closes: time }))
		.max(50)
		.meta({ description: 'Weekday 1 is Monday. Times are those of the site’s own zone.' }),
	rooms: z.array(named).max(100),
	closures: z
		.array(z.strictObject({ from: plainDate, to: plainDate, reason: line(100) }))
		.max(200)
		.optional()
		.meta({ description: 'Days on which the site sees nobody, first and last included.' })
});

const yearMonth = z
	.string()
	.regex(/^(19|20|21)\d{2}-(0[1-9]|1[0-2])$/, 'Give a month as year and month: 2026-06.');

const characteristic = z.discriminatedUnion('kind', [
	z.strictObject({
		key: keySchema,
		name: line(100),
		kind: z.literal('choice'),
		choices: z.array(named).min(2).max(50)
	}),
	z.strictObject({
		key: keySchema,
		name: line(100),
		kind: z.literal('number'),
		unit,
		decimals: whole(0, 6)
	}),
	z.strictObject({ key: keySchema, name: line(100), kind: z.literal('birth-date') })
]);

const anchor = z
	.string()
	.regex(
		/^(enrolment|randomisation|visit:[a-z][a-z0-9]*(-[a-z0-9]+)*)$/,
		'Count from “enrolment”, “randomisation” or “visit:” with the key of another visit.'
	)
	.meta({ description: 'enrolment, randomisation, or visit:<key of another visit>' });

const visit = z.strictObject({
	key: keySchema,
	name: line(100),
	anchor,
	target: amount.meta({
		description:
			'Distance from the anchor. Months lead to the same day of a later month, or to that month’s last day.'
	}),
	before: width,
	after: width,
	order: whole(0, 999),
	lengthMinutes: whole(5, 1440)
});

/** Who may be named to enter what could reveal the arm; whoever does is not masked to it. */
export const revealingRoles = ['pharmacist', 'nurse', 'investigator'] as const;
export type RevealingRole = (typeof revealingRoles)[number];

const common = {
	key: keySchema,
	name: line(100),
	showLast: z.enum(['before', 'after', 'never']).meta({
		description: 'Whether the last value is shown before entry, only after it, or never.'
	}),
	couldRevealArm: z
		.strictObject({ enteredBy: z.enum(revealingRoles) })
		.optional()
		.meta({
			description:
				'A value from which the arm could be guessed: entered and read by this role only, and kept from everybody masked with all that is derived from it.'
		})
};
const notDoneReasons = z.array(line(100)).min(1).max(20);

const limits = {
	unit,
	decimals: whole(0, 6),
	scale: z.enum(['linear', 'log']).optional().meta({
		description:
			'Scale on which a value is judged against a subject’s own earlier ones: log for a concentration; linear when left out.'
	}),
	alsoIn: z
		.array(unit)
		.max(5)
		.optional()
		.meta({ description: 'Other units a value may be entered in.' }),
	analyte: z
		.enum(analyteKeys)
		.optional()
		.meta({ description: 'Needed where mass turns into moles.' }),
	hardLow: finite.optional(),
	hardHigh: finite.optional(),
	softLow: finite.optional(),
	softHigh: finite.optional(),
	softChange: z
		.strictObject({
			from: z.enum(['last', 'baseline']),
			by: z.enum(['percent', 'amount']),
			size: z.number().positive('Give a number above zero.')
		})
		.optional()
		.meta({ description: 'A change larger than this asks for a second look.' }),
	limitsSource: line(200).optional()
};

const measure = z.discriminatedUnion('kind', [
	z.strictObject({ ...common, kind: z.literal('number'), ...limits, notDoneReasons }),
	z.strictObject({
		...common,
		kind: z.literal('repeated'),
		...limits,
		notDoneReasons,
		readings: whole(2, 10),
		readingsNeeded: whole(1, 10),
		summary: z.enum(['mean', 'mean-without-first', 'median', 'last']),
		summaryDecimals: whole(0, 6)
	}),
	z.strictObject({
		...common,
		kind: z.literal('choice'),
		choices: z.array(named).min(2).max(50),
		notDoneReasons
	}),
	z.strictObject({ ...common, kind: z.literal('date'), future: z.boolean(), notDoneReasons }),
	z.strictObject({ ...common, kind: z.literal('text'), maxLength: whole(1, 4000), notDoneReasons }),
	z.strictObject({
		...common,
		kind: z.literal('derived'),
		unit,
		decimals: whole(0, 6),
		derivedBy: z.strictObject({
			formula: z.enum(formulaKeys),
			inputs: z
				.record(
					keySchema,
					z
						.string()
						.regex(
							/^(measure|characteristic|age):[a-z][a-z0-9]*(-[a-z0-9]+)*$/,
							'Name the input as measure:…, characteristic:… or age:… with its key.'
						)
				)
				.meta({
					description:
						'From the formula’s input names to measure:<key>, characteristic:<key> or age:<key of a birth date>.'
				})
		})
	})
]);

export const studyDefinition = z
	.strictObject({
		format: z.literal('heddle.study/1'),
		code: z
			.string()
			.regex(
				/^[A-Z0-9][A-Z0-9-]{1,19}$/,
				'A study code has 2 to 20 capital letters, digits and hyphens.'
			),
		name: line(200),
		masked: z
			.boolean()
			.meta({ description: 'Whether the arms are kept from everyone at the sites.' }),
		plannedSubjects: whole(1, 100_000).optional(),
		arms: z.array(arm).max(8),
		strata: z.array(stratum).max(4),
		stratifyBySite: z.boolean(),
		allocation: z
			.strictObject({ method: z.enum(['permuted-blocks', 'minimisation']) })
			.optional()
			.meta({
				description:
					'How arms are allocated; permuted blocks when left out. Block sizes, seeds and chances are not part of a definition.'
			}),
		sites: z.array(site).max(99),
		enrolmentPlan: z
			.strictObject({
				from: yearMonth,
				months: whole(1, 240),
				sites: z.array(z.strictObject({ site: siteCode, subjects: whole(0, 100_000) })).max(99)
			})
			.optional()
			.meta({
				description: 'Subjects each site means to enrol, spread evenly over the months.'
			}),
		characteristics: z
			.array(characteristic)
			.max(20)
			.meta({ description: 'What is known of a subject once, at enrolment.' }),
		visits: z.array(visit).min(1).max(100),
		measures: z.array(measure).min(1).max(200),
		comparisons: z
			.array(
				z.strictObject({
					lower: keySchema,
					higher: keySchema,
					orEqual: z
						.literal(true)
						.optional()
						.meta({ description: 'Whether the two may be equal; no when left out.' }),
					weight: z.enum(['hard', 'soft']).optional().meta({
						description:
							'hard refuses what breaks the rule, soft asks to look again; hard when left out.'
					})
				})
			)
			.max(20)
			.meta({ description: 'Pairs of measures of which the first must be below the second.' }),
		schedule: z
			.record(keySchema, z.array(keySchema).max(200))
			.meta({ description: 'From each visit’s key to the keys of the measures taken there.' }),
		baselineVisit: keySchema,
		primaryMeasure: keySchema,
		timeUnit: z
			.enum(['day', 'week', 'month', 'year'])
			.meta({ description: 'Unit of time in the analysis.' }),
		consentVersions: z
			.array(
				z.strictObject({
					version: line(20),
					name: line(200),
					from: plainDate,
					language: z
						.enum(['en', 'de'])
						.optional()
						.meta({ description: 'Language of the form; English when left out.' })
				})
			)
			.max(50),
		minors: z
			.strictObject({ majority: whole(12, 25), assentFrom: whole(3, 24) })
			.optional()
			.meta({
				description:
					'Where minors take part: the age at which they decide for themselves, and from which they are asked to assent.'
			}),
		lostAfterAttempts: whole(1, 50).optional().meta({
			description:
				'Contact attempts without answer before somebody may be called lost to follow-up; one when left out.'
		}),
		adverseEvents: z.boolean().optional().meta({
			description: 'Whether the study keeps a list of adverse events; yes when left out.'
		}),
		eligibility: z
			.array(
				z.strictObject({
					key: keySchema,
					kind: z.enum(['inclusion', 'exclusion']),
					text: line(1000)
				})
			)
			.max(100),
		eligibilitySigned: z.boolean().optional().meta({
			description:
				'Whether nobody is enrolled or randomised before the investigator has signed the eligibility checklist; no when left out.'
		})
	})
	.meta({
		id: 'heddle.study/1',
		title: 'Heddle study definition',
		description: 'Arms, sites, visits, measures and the schedule of activities of one study.'
	});

export type StudyDefinition = z.infer<typeof studyDefinition>;
export type Arm = StudyDefinition['arms'][number];
export type SiteDefinition = StudyDefinition['sites'][number];
export type OpeningHours = SiteDefinition['openingHours'][number];
export type Characteristic = StudyDefinition['characteristics'][number];
export type PlannedVisit = StudyDefinition['visits'][number];
export type VisitOffset = PlannedVisit['target'];
export type Measure = StudyDefinition['measures'][number];
export type NumberMeasure = Extract<Measure, { kind: 'number' | 'repeated' }>;
export type DerivedMeasure = Extract<Measure, { kind: 'derived' }>;

/** Unit of the measure's values, or null where there are no numbers. */
export function unitOfMeasure(measure: Measure): UnitCode | null {
	return 'unit' in measure ? measure.unit : null;
}

/** Decimals of the value that is kept for a measure (of the summary, where there are several readings). */
export function decimalsOfMeasure(measure: Measure): number {
	if (measure.kind === 'repeated') return measure.summaryDecimals;
	return 'decimals' in measure ? measure.decimals : 0;
}

/**
 * The role to which each measure's values are open, by its key, for those that could reveal the arm; with what is
 * derived from them, however far.
 */
export function openTo(definition: Pick<StudyDefinition, 'measures'>): Map<string, RevealingRole> {
	const open = new Map<string, RevealingRole>();
	for (const measure of definition.measures)
		if (measure.couldRevealArm) open.set(measure.key, measure.couldRevealArm.enteredBy);
	for (let grew = open.size > 0; grew;) {
		grew = false;
		for (const measure of definition.measures) {
			if (measure.kind !== 'derived' || open.has(measure.key)) continue;
			const from = measuresBehind(measure).find((key) => open.has(key));
			const role = from === undefined ? undefined : open.get(from);
			if (role) {
				open.set(measure.key, role);
				grew = true;
			}
		}
	}
	return open;
}

/** Keys of the measures a derived one is worked out from. */
export const measuresBehind = (measure: DerivedMeasure): string[] =>
	Object.values(measure.derivedBy.inputs).flatMap((reference) =>
		reference.startsWith('measure:') ? [reference.slice('measure:'.length)] : []
	);

/** Measures taken at a visit, in the order of the schedule. */
export function measuresAt(definition: StudyDefinition, visitKey: string): Measure[] {
	const byKey = new Map(definition.measures.map((each) => [each.key, each]));
	return (definition.schedule[visitKey] ?? []).flatMap((key) => byKey.get(key) ?? []);
}

export function isRandomised(definition: StudyDefinition): boolean {
	return definition.arms.length >= 2;
}

/** What an arm is called; null where there is none to tell, as everywhere in a masked study. */
export const armName = (definition: StudyDefinition, key: string | null): string | null =>
	key === null ? null : (definition.arms.find((arm) => arm.key === key)?.name ?? key);

/** The definition as JSON Schema, for people who write one by hand. Rules across fields are not in it. */
export function definitionJsonSchema(): Record<string, unknown> {
	return z.toJSONSchema(studyDefinition, { target: 'draft-2020-12', io: 'input' });
}
