import { describe, expect, test } from 'vitest';
import { effectsOf, effectWords, exitKinds, unansweredAttempts, type VisitStanding } from './exit';
import { foldName, matchesName } from './contact-search';

const now = new Date('2026-06-09T10:00:00Z');
const visit = (change: Partial<VisitStanding>): VisitStanding => ({
	status: 'planned',
	latest: '2026-07-01',
	bookedAt: null,
	...change
});
const visits = [
	visit({}),
	visit({ status: 'booked', bookedAt: new Date('2026-06-20T10:00:00Z') }),
	visit({ status: 'booked', bookedAt: new Date('2026-06-09T08:00:00Z') }),
	visit({ latest: '2026-06-01' }),
	visit({ status: 'under way' }),
	visit({ status: 'completed' }),
	visit({ status: 'missed' })
];

describe('what leaving does', () => {
	test('stopping the treatment changes no visit', () => {
		expect(effectsOf('intervention discontinued', '2026-06-09', visits, now)).toEqual({
			visitsEnded: 0,
			bookingsCancelled: 0,
			mails: 0,
			toAccountFor: 0,
			underWay: 0
		});
	});
	test('the other ways end what is to come and leave what is past', () => {
		expect(effectsOf('stopped visits', '2026-06-09', visits, now)).toEqual({
			visitsEnded: 3,
			bookingsCancelled: 2,
			mails: 1,
			toAccountFor: 1,
			underWay: 1
		});
		expect(effectsOf('died', '2026-06-09', visits, now).mails).toBe(0);
	});
	test('is said in words before it is recorded', () => {
		const said = effectWords(
			'consent withdrawn',
			effectsOf('consent withdrawn', '2026-06-09', visits, now),
			true
		);
		expect(said).toEqual([
			'3 visits to come become not required.',
			'2 bookings are cancelled.',
			'The subject gets a mail that the appointment does not take place.',
			'Nothing more can be entered about this subject.',
			'The visit under way can be finished as it stands.',
			'One window that has passed is still to be accounted for.'
		]);
		for (const kind of exitKinds)
			expect(
				effectWords(kind, effectsOf(kind, '2026-06-09', [], now), null).length
			).toBeGreaterThan(0);
	});
});

test('attempts count since somebody was last reached', () => {
	expect(unansweredAttempts([])).toBe(0);
	expect(unansweredAttempts(['no answer', 'reached', 'message left', 'wrong details'])).toBe(2);
	expect(unansweredAttempts(['no answer', 'declined'])).toBe(0);
});

describe('names', () => {
	test('are folded: accents, case, letters without a plain form', () => {
		expect(foldName('Zoë Łukasz-Ångström')).toBe('zoe lukasz-angstrom');
		expect(foldName('STRAẞE Weiß')).toBe('strasse weiss');
	});
	test('match by the beginning of any word, in any order', () => {
		const name = 'Müller-Lüdenscheidt, Anna María';
		for (const asked of ['mul', 'LUDEN', 'maria', 'anna mull', 'mar ann', 'Mü'])
			expect([asked, matchesName(name, asked)]).toEqual([asked, true]);
		for (const asked of ['uller', 'anna x', '', '  '])
			expect([asked, matchesName(name, asked)]).toEqual([asked, false]);
	});
});
