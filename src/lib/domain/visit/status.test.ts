import { describe, expect, it } from 'vitest';
import { plainDateOf } from '../../time/dates';
import {
	checkMove,
	isSettled,
	needsReason,
	nextStatuses,
	visitStatuses,
	type VisitStatus
} from './status';

const d = plainDateOf;
const today = d('2026-06-20');
const window = { earliest: d('2026-06-01'), target: d('2026-06-08'), latest: d('2026-06-15') };

/** Written by hand from the job: every pair that is not here is refused. */
const allowed: [VisitStatus, VisitStatus, 'reason' | 'no reason'][] = [
	['planned', 'booked', 'no reason'],
	['planned', 'under way', 'no reason'],
	['planned', 'missed', 'reason'],
	['planned', 'not required', 'reason'],
	['booked', 'planned', 'reason'],
	['booked', 'under way', 'no reason'],
	['booked', 'missed', 'reason'],
	['booked', 'not required', 'reason'],
	['under way', 'completed', 'no reason'],
	['under way', 'booked', 'reason'],
	['under way', 'planned', 'reason'],
	['completed', 'under way', 'reason'],
	['missed', 'planned', 'reason'],
	['not required', 'planned', 'reason']
];

describe('visit status', () => {
	for (const from of visitStatuses)
		for (const to of visitStatuses) {
			const rule = allowed.find(([a, b]) => a === from && b === to);
			it(`${from} → ${to}: ${rule ? rule[2] : 'refused'}`, () => {
				const bare = checkMove(from, to, { window, today })?.code ?? null;
				const reasoned = checkMove(from, to, { window, today, reason: 'Moved away' })?.code ?? null;
				if (!rule) {
					expect(bare).toBe('VISIT_MOVE_NOT_ALLOWED');
					expect(reasoned).toBe('VISIT_MOVE_NOT_ALLOWED');
				} else {
					expect(reasoned).toBeNull();
					expect(bare).toBe(rule[2] === 'reason' ? 'REASON_NEEDED' : null);
					expect(needsReason(from, to)).toBe(rule[2] === 'reason');
					expect(nextStatuses(from)).toContain(to);
				}
			});
		}

	it('a blank reason is none', () => {
		expect(checkMove('missed', 'planned', { today, reason: ' \t\n' })?.code).toBe('REASON_NEEDED');
	});

	it('nothing is missed while its window is open', () => {
		const reason = 'Not reached';
		for (const day of ['2026-05-30', '2026-06-08', '2026-06-15'])
			expect(checkMove('booked', 'missed', { today: d(day), window, reason })?.code).toBe(
				'WINDOW_NOT_PASSED'
			);
		expect(checkMove('booked', 'missed', { today: d('2026-06-16'), window, reason })).toBeNull();
	});

	it('settled visits are over', () => {
		expect(visitStatuses.filter(isSettled)).toEqual(['completed', 'missed', 'not required']);
	});
});
