import {
	ageInYears,
	findPlainDate,
	plainDateOf,
	type PartialDate,
	type PlainDate
} from '../../time/dates';
import type { StudyDefinition } from '../study/definition';

export const assents = ['given', 'declined', 'not able'] as const;
export type Assent = (typeof assents)[number];

export const assentWords: Record<Assent, string> = {
	given: 'assent was given',
	declined: 'assent was declined',
	'not able': 'not able to assent'
};

export type Minors = NonNullable<StudyDefinition['minors']>;

/** A consent as recorded, as far as it decides whether somebody may be in the study. */
export interface GivenConsent {
	/** Label and language of the form. */
	form: string;
	signedOn: PlainDate;
	signedBy: 'participant' | 'representative';
	minor: boolean;
	assent: Assent | null;
	copyGiven: boolean;
	withdrawnOn: PlainDate | null;
}

/** The first and the last day on which somebody may have been born, by what is known. */
export function birthSpan(born: PartialDate): [PlainDate, PlainDate] {
	const day = findPlainDate(born);
	if (day) return [day, day];
	if (born.length === 7) {
		for (let last = 31; last > 27; last--) {
			const end = findPlainDate(`${born}-${last}`);
			if (end) return [plainDateOf(`${born}-01`), end];
		}
	}
	return [plainDateOf(`${born.slice(0, 4)}-01-01`), plainDateOf(`${born.slice(0, 4)}-12-31`)];
}

/** Whether somebody is a minor on a day; null where what is known of the birth date leaves it open. */
export function isMinor(born: PartialDate, on: PlainDate, minors: Minors): boolean | null {
	const [earliest, latest] = birthSpan(born);
	if (ageInYears(earliest, on) < minors.majority) return true;
	if (ageInYears(latest, on) >= minors.majority) return false;
	return null;
}

export interface Majority {
	/** The first day on which the person may be of age. */
	day: PlainDate;
	/** Born on 29 February, and of age in a year that has none: counted on 1 March, and said so. */
	leap: boolean;
	/** The whole birth date is not known: this is the first day it may be. */
	about: boolean;
}

/** The day somebody comes of age. */
export function majorityOf(born: PartialDate, majority: number): Majority {
	const [earliest, latest] = birthSpan(born);
	const year = String(Number(earliest.slice(0, 4)) + majority).padStart(4, '0');
	const same = findPlainDate(`${year}${earliest.slice(4)}`);
	return {
		day: same ?? plainDateOf(`${year}-03-01`),
		leap: same === null,
		about: earliest !== latest
	};
}

export interface ConsentGround {
	/** The forms by which somebody may consent to the version. */
	forms: ReadonlySet<string>;
	/** The day it must stand on or before. */
	on: PlainDate;
	/** Where the version asks again with the form that was there before: not signed before its approval. */
	notBefore: PlainDate | null;
	minors: Minors | null;
	born: PartialDate | null;
}

/** Why a consent does not count, in words; null when it does. */
export function whyNot(consent: GivenConsent, ground: ConsentGround): string | null {
	if (consent.withdrawnOn !== null) return 'it was withdrawn';
	if (!consent.copyGiven) return 'no copy was given';
	if (consent.signedOn > ground.on) return 'it was signed after that day';
	if (!ground.forms.has(consent.form)) return 'its form belongs to another protocol version';
	if (ground.notBefore && consent.signedOn < ground.notBefore)
		return 'it was signed before the protocol version was approved';
	if (consent.assent === 'declined') return 'the participant declined to assent';
	const { minors, born } = ground;
	if (!minors) return null;
	const minor = born === null ? null : isMinor(born, consent.signedOn, minors);
	if (minor === true && !consent.minor)
		return 'the participant was a minor: a representative consents, and assent is asked';
	if (minor === false && consent.minor)
		return 'the participant was of age: he or she decides alone';
	return null;
}
