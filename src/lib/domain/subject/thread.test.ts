import { describe, expect, it } from 'vitest';
import {
	describeThread,
	linePieces,
	nextVisit,
	tally,
	type ThreadRow,
	type ThreadVisit
} from './thread';

const visit = (change: Partial<ThreadVisit>): ThreadVisit => ({
	id: change.name ?? 'visit',
	name: 'Visit',
	position: 1,
	status: 'planned',
	earliest: 0,
	target: 5,
	latest: 10,
	took: null,
	booked: null,
	earliestOn: null,
	latestOn: null,
	...change
});
const row = (visits: ThreadVisit[], change: Partial<ThreadRow> = {}): ThreadRow => ({
	id: 'subject',
	number: '02-0017-0',
	importedAs: null,
	site: { id: 'site', code: '02', name: 'Saltreach' },
	enrolledOn: '2026-01-01',
	randomisedOn: null,
	today: 60,
	exit: null,
	visits,
	...change
});

const visits = [
	visit({ name: 'Baseline', status: 'completed', took: 3 }),
	visit({ name: 'Month 1', status: 'missed', earliest: 25, target: 30, latest: 35 }),
	visit({ name: 'Month 2', status: 'completed', earliest: 55, target: 60, latest: 65, took: 50 }),
	visit({ name: 'Month 3', earliest: 85, target: 90, latest: 95 }),
	visit({ name: 'Month 4', earliest: 115, target: 120, latest: 125 })
];

describe('a thread', () => {
	it('is told in words', () => {
		expect(describeThread(row(visits))).toBe(
			'02-0017-0: Baseline measured, in its window; Month 1 missed; Month 2 measured, outside its window; 2 visits to come.'
		);
		expect(
			describeThread(
				row([visit({ name: 'Week 2', booked: 8 }), visit({ name: 'Week 4', latest: 20 })], {
					today: 30,
					exit: { kind: 'consent withdrawn', at: 20, on: '2026-01-21' }
				})
			)
		).toBe('02-0017-0: Week 2 booked; Week 4 not done, its window has passed; consent withdrawn.');
		expect(describeThread(row([]))).toBe('02-0017-0: no visits yet.');
	});

	it('breaks at what was missed and runs to today, or to where the subject left', () => {
		const frame = { from: -10, to: 190 };
		const pieces = linePieces(row(visits), frame);
		expect(pieces).toHaveLength(2);
		expect(pieces[0]?.[1]).toBeCloseTo(28.2, 6);
		expect(pieces[1]).toEqual([expect.closeTo(31.8, 6), 60]);
		const left = linePieces(
			row(visits, { exit: { kind: 'died', at: 55, on: '2026-02-25' } }),
			frame
		);
		expect(left.at(-1)?.[1]).toBe(55);
	});

	it('that has no calendar runs to its last measurement', () => {
		const ages = [8, 10, 12, 14].map((years, at) =>
			visit({
				name: `Age ${years}`,
				position: at + 1,
				status: 'completed',
				earliest: null,
				target: null,
				latest: null,
				took: years * 365.25
			})
		);
		const undated = row(ages, { today: null });
		const pieces = linePieces(undated, { from: 2900, to: 5200 });
		expect(pieces).toHaveLength(1);
		expect(pieces[0]?.[1]).toBe(14 * 365.25);
		expect(describeThread(undated)).toContain('Age 8 measured; Age 10 measured');
	});

	it('is counted up, and knows what comes next', () => {
		expect(tally(row(visits, { today: 100 }))).toEqual({ measured: 2, missed: 1, passed: 1 });
		expect(nextVisit(row(visits))?.name).toBe('Month 3');
	});
});
