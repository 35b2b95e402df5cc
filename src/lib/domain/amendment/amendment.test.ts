import { describe, expect, test } from 'vitest';
import { plainDateOf } from '../../time/dates';
import type { StudyDefinition } from '../study/definition';
import { findTemplate } from '../study/templates.server';
import {
	askedAgainBy,
	checkAmendment,
	formsInForce,
	groundChanged,
	type VersionFacts
} from './amendment';
import { replan, type StandingVisit } from './replan';

const form = (version: string, language?: 'en' | 'de') => ({
	version,
	name: version,
	from: plainDateOf('2026-01-05'),
	...(language ? { language } : {})
});
const version = (number: number, reconsent: boolean, ...forms: string[]): VersionFacts => ({
	number,
	reconsent,
	forms: forms.map((each) => form(each))
});
const template = () => findTemplate('two-arm-trial')?.definition as StudyDefinition;

describe('the forms in force', () => {
	test('are all of the version’s own until an amendment asks people again with a new one', () => {
		const versions = [
			version(1, false, '1.0', '1.1'),
			version(2, true, '1.0', '1.1', '2.0'),
			version(3, false, '1.0', '1.1', '2.0', '2.1')
		];
		expect([...formsInForce(versions, 1)]).toEqual(['1.0 en', '1.1 en']);
		expect([...formsInForce(versions, 2)]).toEqual(['2.0 en']);
		expect([...formsInForce(versions, 3)]).toEqual(['2.0 en', '2.1 en']);
	});
	test('stay where people are asked again with the same form', () => {
		expect([...formsInForce([version(1, false, '1.0'), version(2, true, '1.0')], 2)]).toEqual([
			'1.0 en'
		]);
	});
	test('are told apart by language', () => {
		const two = { ...version(2, true), forms: [form('2.0', 'en'), form('1.0', 'de')] };
		const one = { ...version(1, false), forms: [form('1.0', 'de')] };
		expect([...formsInForce([one, two], 2)]).toEqual(['2.0 en']);
	});
});

test('whoever skips a version that asked again is asked by the newest of those between', () => {
	const versions = [version(1, false), version(2, true), version(3, false), version(4, true)];
	expect(askedAgainBy(versions, 1, 3)).toBe(2);
	expect(askedAgainBy(versions, 1, 4)).toBe(4);
	expect(askedAgainBy(versions, 2, 3)).toBeNull();
	expect(askedAgainBy(versions, 3, 3)).toBeNull();
});

describe('checking an amendment', () => {
	const days = { today: plainDateOf('2026-06-09'), previousApproval: plainDateOf('2026-02-01') };
	const answers = { approvedOn: '2026-06-01', reconsent: '' as const, reconsentBy: '' };
	const before = template();
	test('a new form means that people are asked again, unless somebody says no', () => {
		const after = { ...before, consentVersions: [...before.consentVersions, form('2.0')] };
		expect(checkAmendment(before, after, answers, days)).toEqual({ ok: true, reconsent: true });
		expect(checkAmendment(before, after, { ...answers, reconsent: 'no' }, days)).toEqual({
			ok: true,
			reconsent: false
		});
	});
	test('other visits without a new form leave nothing to guess', () => {
		const after = { ...before, visits: before.visits.slice(0, -1) };
		expect(checkAmendment(before, after, answers, days)).toMatchObject({
			errors: { reconsent: expect.stringContaining('say whether') }
		});
		expect(checkAmendment(before, { ...before, name: 'Other' }, answers, days)).toEqual({
			ok: true,
			reconsent: false
		});
	});
	test('is approved, not in future, and after the version before', () => {
		const at = (approvedOn: string) =>
			checkAmendment(before, { ...before, name: 'Other' }, { ...answers, approvedOn }, days).ok;
		expect(at('')).toBe(false);
		expect(at('2026-06-10')).toBe(false);
		expect(at('2026-01-31')).toBe(false);
		expect(at('2026-02-01')).toBe(true);
	});
	test('arms, strata and masking stay', () => {
		expect(groundChanged(before, { ...before, name: 'Other' })).toBeNull();
		expect(groundChanged(before, { ...before, masked: !before.masked })).toContain('masked');
		expect(groundChanged(before, { ...before, strata: [] })).toContain('strata');
		expect(groundChanged(before, { ...before, arms: before.arms.slice(0, 1) })).toContain('arms');
	});
});

describe('planning visits anew', () => {
	const today = plainDateOf('2026-04-10');
	const anchors = {
		enrolment: plainDateOf('2026-03-01'),
		randomisation: plainDateOf('2026-03-01'),
		visits: {}
	};
	const window = (earliest: string, target: string, latest: string) => ({
		earliest: plainDateOf(earliest),
		target: plainDateOf(target),
		latest: plainDateOf(latest)
	});
	const standing = (change: Partial<StandingVisit>): StandingVisit => ({
		id: change.key ?? 'month-3',
		key: 'month-3',
		status: 'planned',
		position: 4,
		window: window('2026-05-18', '2026-06-01', '2026-06-15'),
		dropped: false,
		...change
	});
	const { visits } = template();
	test.each(['completed', 'missed', 'under way', 'not required'] as const)(
		'a visit that is %s never changes',
		(status) => {
			const plan = replan({ visits }, [standing({ status })], anchors, today);
			expect(plan.some((step) => 'id' in step && step.id === 'month-3')).toBe(false);
		}
	);
	test('nor does one whose window has closed', () => {
		const passed = standing({ window: window('2026-03-01', '2026-03-05', '2026-04-09') });
		expect(replan({ visits }, [passed], anchors, today).some((step) => 'id' in step)).toBe(false);
		// On its last day it is still to come.
		const last = standing({ window: window('2026-03-01', '2026-03-05', '2026-04-10') });
		expect(replan({ visits }, [last], anchors, today)).toContainEqual(
			expect.objectContaining({ what: 'follow', id: 'month-3' })
		);
	});
	test('makes what is new and still possible, and drops what the plan has no more', () => {
		const plan = replan(
			{ visits },
			[
				standing({ key: 'month-5', id: 'month-5' }),
				standing({ key: 'baseline', id: 'baseline', status: 'completed', position: 1 })
			],
			anchors,
			today
		);
		expect(plan).toContainEqual({ what: 'drop', id: 'month-5' });
		const made = plan.flatMap((step) => (step.what === 'make' ? [step.key] : []));
		// Week 2 and month 1 closed on 18 March and 8 April.
		expect(made).toEqual(['month-3', 'month-6', 'month-9', 'month-12', 'month-18', 'month-24']);
	});
	test('what is to come stands after everything that stays', () => {
		const plan = replan(
			{ visits },
			[standing({ key: 'month-1', id: 'm1', status: 'completed', position: 7 })],
			anchors,
			today
		);
		for (const step of plan) if ('position' in step) expect(step.position).toBeGreaterThan(7);
	});
	test('a visit that was dropped comes back when a later version has it again', () => {
		const plan = replan(
			{ visits },
			[standing({ status: 'not required', dropped: true })],
			anchors,
			today
		);
		expect(plan).toContainEqual(expect.objectContaining({ id: 'month-3', revive: true }));
	});
});
