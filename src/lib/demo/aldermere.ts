import { addDays, isoWeekday, type PlainDate } from '$lib/time/dates';
import type { Measure, StudyDefinition } from '$lib/domain/study/definition';
import { chance, type Chance } from './chance';

/**
 * The invented trial: who comes when, what becomes of each visit, what would be measured. Pure and from a fixed seed; what the
 * arm does to a subject is asked for when the arm is known.
 */
export const aldermereSites = [
	{ name: 'Northmoor', zone: 'Europe/London', rooms: ['Room 1', 'Room 2'] },
	{ name: 'Saltreach', zone: 'America/Halifax', rooms: ['Room 1', 'Room 2'] },
	{ name: 'Tarnbeck', zone: 'Europe/Helsinki', rooms: ['Room 1', 'Room 2'] },
	{ name: 'Quillhaven', zone: 'Australia/Adelaide', rooms: ['Room 1', 'Room 2'] }
] as const;

/** A laboratory value that the treatment is known to change: the arm could be read off it. */
export const tellingMeasure: Measure = {
	key: 'urine-glucose',
	name: 'Urine glucose',
	kind: 'number',
	unit: 'mmol/L',
	decimals: 1,
	hardLow: 0,
	hardHigh: 400,
	limitsSource: 'Common practice.',
	showLast: 'never',
	notDoneReasons: ['No sample', 'Sample lost'],
	couldRevealArm: { enteredBy: 'pharmacist' }
};
const tellingVisits = ['baseline', 'month-6', 'month-12'];

/** The template's schedule with the value that only the pharmacists see. */
export function withTellingMeasure(definition: StudyDefinition): StudyDefinition {
	return {
		...definition,
		measures: [...definition.measures, tellingMeasure],
		schedule: Object.fromEntries(
			Object.entries(definition.schedule).map(([visit, keys]) => [
				visit,
				tellingVisits.includes(visit) ? [...keys, tellingMeasure.key] : keys
			])
		)
	};
}

export type Fate = 'kept' | 'late' | 'early' | 'missed';

export interface StoryVisit {
	fate: Fate;
	/** Where in its window the visit falls, from −1 (earliest) to 1 (latest). */
	place: number;
	/** Days beyond the window when it is early or late. */
	beyond: number;
	/** Booked this many days before. */
	bookedAhead: number;
	/** Moved once before it took place. */
	moved: boolean;
	/** Nobody has got round to it: matters only if its window closes about now. */
	waits: boolean;
	notDone: 'potassium' | 'weight' | null;
	noise: { egfr: number; systolic: number; diastolic: number; weight: number; potassium: number };
}

export interface StorySubject {
	site: number;
	enrolsOn: PlainDate;
	sex: 'female' | 'male';
	birthDate: PlainDate;
	name: string;
	email: boolean;
	/** True filtration rate at randomisation, mL/min/1.73 m². */
	egfr: number;
	/** Yearly change without treatment, mL/min/1.73 m² per year. */
	slope: number;
	systolic: number;
	diastolic: number;
	weight: number;
	potassium: number;
	visits: StoryVisit[];
	/** Leaves after this many days, and how. */
	leaves: {
		afterDays: number;
		kind: 'consent withdrawn' | 'lost to follow-up' | 'intervention discontinued';
	} | null;
}

export interface StoryFailure {
	site: number;
	on: PlainDate;
	reason: string;
}

const givenNames = [
	'Alma',
	'Bero',
	'Cleo',
	'Dorrit',
	'Edvin',
	'Fenna',
	'Gisle',
	'Hanne',
	'Iver',
	'Jutta',
	'Kaspar',
	'Liv',
	'Matteo',
	'Nora',
	'Odd',
	'Petra',
	'Quinn',
	'Rasmus',
	'Signe',
	'Tove',
	'Ulla',
	'Vidar',
	'Wanda',
	'Yrsa'
];
const familyNames = [
	'Ashdown',
	'Birkmoor',
	'Calloway',
	'Dunmere',
	'Eastrand',
	'Fallowell',
	'Greywater',
	'Harrowgate',
	'Inglefoot',
	'Kestrelby',
	'Lambourne',
	'Marlwood',
	'Netherby',
	'Oakhollow',
	'Penhallow',
	'Quarrington',
	'Ravensdal',
	'Silverlea',
	'Thornbury',
	'Underhay'
];
const failures = [
	'Filtration rate outside 25 to 75 mL/min/1.73 m²',
	'Did not wish to come for 24 months',
	'Taking part in another trial',
	'Dialysis expected within six months'
];

const visitsPlanned = 9;

function visitStory(draw: Chance, number: number): StoryVisit {
	// The first visit is the day of enrolment; later ones are missed or late now and then.
	const u = draw.next();
	const fate: Fate =
		number === 0 ? 'kept' : u < 0.07 ? 'missed' : u < 0.115 ? 'late' : u < 0.125 ? 'early' : 'kept';
	return {
		fate,
		place: Math.max(-0.95, Math.min(0.95, draw.normal(0.05, 0.45))),
		beyond: draw.whole(1, fate === 'early' ? 3 : 9),
		bookedAhead: draw.whole(4, 16),
		moved: draw.happens(0.08),
		waits: draw.happens(0.35),
		notDone: draw.happens(0.03) ? 'potassium' : draw.happens(0.01) ? 'weight' : null,
		noise: {
			egfr: draw.normal(0, 2.6),
			systolic: draw.normal(0, 6),
			diastolic: draw.normal(0, 4),
			weight: draw.normal(0, 0.7),
			potassium: draw.normal(0, 0.22)
		}
	};
}

const clamp = (value: number, low: number, high: number) => Math.min(high, Math.max(low, value));

/** Everybody of the trial, in the order in which they enrol, for a story that has reached `today`. */
export function aldermere(today: PlainDate, subjects = 240, seed = 20_260_609): StorySubject[] {
	const draw = chance(seed);
	const people: StorySubject[] = [];
	for (let i = 0; i < subjects; i++) {
		// Enrolment quickens at first, then keeps its pace: most came a while ago, a few last week.
		let enrolsOn = addDays(
			today,
			-Math.round(12 + 428 * Math.sqrt(1 - (i + draw.next()) / subjects))
		);
		while (isoWeekday(enrolsOn) > 5) enrolsOn = addDays(enrolsOn, 1);
		const female = draw.happens(0.47);
		people.push({
			site: draw.pick([0, 0, 0, 1, 1, 1, 2, 2, 3, 3]),
			enrolsOn,
			sex: female ? 'female' : 'male',
			birthDate: addDays(enrolsOn, -Math.round(365.25 * clamp(draw.normal(58, 10), 32, 79))),
			name: `${draw.pick(givenNames)} ${draw.pick(familyNames)}`,
			email: draw.happens(0.25),
			egfr: clamp(draw.normal(48, 9), 27, 73),
			slope: draw.normal(-4.2, 1.6),
			systolic: draw.normal(136, 11),
			diastolic: draw.normal(80, 6),
			weight: clamp(draw.normal(female ? 72 : 85, 12), 46, 130),
			potassium: draw.normal(4.5, 0.3),
			visits: Array.from({ length: visitsPlanned }, (_, number) => visitStory(draw, number)),
			leaves: draw.happens(0.09)
				? {
						afterDays: draw.whole(40, 400),
						kind: draw.pick([
							'consent withdrawn',
							'consent withdrawn',
							'lost to follow-up',
							'intervention discontinued'
						] as const)
					}
				: null
		});
	}
	return people.sort((a, b) => (a.enrolsOn < b.enrolsOn ? -1 : a.enrolsOn > b.enrolsOn ? 1 : 0));
}

/** People who were considered and not entered. */
export function aldermereFailures(today: PlainDate, seed = 77): StoryFailure[] {
	const draw = chance(seed);
	return Array.from({ length: 28 }, () => {
		let on = addDays(today, -draw.whole(15, 430));
		while (isoWeekday(on) > 5) on = addDays(on, 1);
		return { site: draw.whole(0, 3), on, reason: draw.pick(failures) };
	}).sort((a, b) => (a.on < b.on ? -1 : 1));
}

/** How much the second arm slows the loss, mL/min/1.73 m² per year. */
export const slowing = 1.3;

/** What the laboratory would find for the filtration rate on this day. */
export const trueEgfr = (
	subject: StorySubject,
	slows: boolean,
	days: number,
	noise: number
): number =>
	clamp(subject.egfr + (subject.slope + (slows ? slowing : 0)) * (days / 365.25) + noise, 8, 110);
