import { describe, expect, test } from 'vitest';
import { findPartialDate, plainDateOf, type PartialDate } from '../../time/dates';
import {
	birthSpan,
	isMinor,
	majorityOf,
	whyNot,
	type ConsentGround,
	type GivenConsent
} from './consent';
import { consentInput } from './consent.input';

const born = (text: string) => findPartialDate(text) as PartialDate;
const minors = { majority: 18, assentFrom: 7 };

describe('coming of age', () => {
	test('is the birthday; born on 29 February, 1 March of a year that has none, and said so', () => {
		expect(majorityOf(born('2008-06-09'), 18)).toEqual({
			day: '2026-06-09',
			leap: false,
			about: false
		});
		expect(majorityOf(born('2008-02-29'), 18)).toMatchObject({ day: '2026-03-01', leap: true });
		expect(majorityOf(born('2008-02-29'), 20)).toMatchObject({ day: '2028-02-29', leap: false });
	});
	test('the day before is a minor’s, and the day itself is not', () => {
		expect(isMinor(born('2008-06-09'), plainDateOf('2026-06-08'), minors)).toBe(true);
		expect(isMinor(born('2008-06-09'), plainDateOf('2026-06-09'), minors)).toBe(false);
		expect(isMinor(born('2008-02-29'), plainDateOf('2026-02-28'), minors)).toBe(true);
		expect(isMinor(born('2008-02-29'), plainDateOf('2026-03-01'), minors)).toBe(false);
	});
	test('a birth date known in part leaves the year open', () => {
		expect(birthSpan(born('2008-02'))).toEqual(['2008-02-01', '2008-02-29']);
		expect(isMinor(born('2008'), plainDateOf('2025-12-31'), minors)).toBe(true);
		expect(isMinor(born('2008'), plainDateOf('2026-06-09'), minors)).toBeNull();
		expect(isMinor(born('2008'), plainDateOf('2026-12-31'), minors)).toBe(false);
		expect(majorityOf(born('2008'), 18)).toEqual({ day: '2026-01-01', leap: false, about: true });
	});
});

describe('a consent that counts', () => {
	const given: GivenConsent = {
		form: '1.0 en',
		signedOn: plainDateOf('2026-03-02'),
		signedBy: 'participant',
		minor: false,
		assent: null,
		copyGiven: true,
		withdrawnOn: null
	};
	const ground: ConsentGround = {
		forms: new Set(['1.0 en']),
		on: plainDateOf('2026-03-02'),
		notBefore: null,
		minors,
		born: born('1961-04-30')
	};
	const child = {
		...given,
		signedBy: 'representative' as const,
		minor: true,
		assent: 'given' as const
	};
	const young = { ...ground, born: born('2016-04-30') };
	test('is of a form in force, on or before the day, with a copy, not withdrawn', () => {
		expect(whyNot(given, ground)).toBeNull();
		expect(whyNot({ ...given, signedOn: plainDateOf('2026-03-03') }, ground)).toContain('after');
		expect(whyNot({ ...given, form: '1.0 de' }, ground)).toContain('another protocol version');
		expect(whyNot({ ...given, copyGiven: false }, ground)).toContain('copy');
		expect(whyNot({ ...given, withdrawnOn: given.signedOn }, ground)).toContain('withdrawn');
		expect(whyNot(given, { ...ground, notBefore: plainDateOf('2026-03-03') })).toContain(
			'approved'
		);
	});
	test('of a minor is a representative’s with assent, of an adult his own', () => {
		expect(whyNot(child, young)).toBeNull();
		expect(whyNot(given, young)).toContain('minor');
		expect(whyNot({ ...child, assent: 'declined' }, young)).toContain('declined');
		expect(whyNot({ ...child, assent: 'not able' }, young)).toBeNull();
		expect(whyNot(child, ground)).toContain('of age');
	});
});

test('R-53: each missing part blocks the record', () => {
	const whole = {
		consentVersionId: '019a0000-0000-7000-8000-000000000001',
		signedOn: '2026-03-02',
		signedTime: '10:00',
		explainedBy: '019a0000-0000-7000-8000-000000000002',
		obtainedOn: '2026-03-02',
		obtainedTime: '10:05',
		signedBy: 'representative',
		relationship: 'mother',
		minor: true,
		assent: 'given',
		copyGiven: true
	};
	expect(consentInput.safeParse(whole).success).toBe(true);
	for (const part of Object.keys(whole)) {
		if (part === 'minor') continue;
		const { [part as keyof typeof whole]: _, ...rest } = whole;
		expect([part, consentInput.safeParse(rest).success]).toEqual([part, false]);
	}
	const says = (change: object) =>
		consentInput.safeParse({ ...whole, ...change }).error?.issues.map((issue) => issue.path[0]);
	expect(says({ assent: 'not able' })).toEqual(['assentReason']);
	expect(says({ signedBy: 'participant', relationship: '' })).toEqual(['signedBy']);
	expect(says({ minor: false })).toEqual(['assent']);
});
