import { describe, expect, it } from 'vitest';
import type { CutContent, CutSubject } from '../cut/content';
import { cutFlow } from './cut-flow';
import { flowBreaks } from './flow';

const value = (measured: boolean) => ({
	value: measured ? 1 : null,
	text: null,
	readings: null,
	unit: 'kg',
	notDone: measured ? null : 'Declined',
	takenAt: null,
	enteredAt: '2026-03-01T00:00:00.000Z',
	source: 'form' as const
});

const subject = (id: string, change: Partial<CutSubject> & { measured?: boolean } = {}) => {
	const { measured = true, ...rest } = change;
	return {
		id,
		number: id,
		importedAs: null,
		site: '01',
		enrolledOn: '2026-03-02',
		randomisedOn: '2026-03-02',
		stratum: {},
		characteristics: {},
		exits: [],
		screened: true,
		visits: [
			{
				key: 'baseline',
				name: 'Baseline',
				position: 1,
				status: 'completed',
				happenedOn: '2026-03-02',
				studyTime: null,
				values: { weight: value(measured) }
			}
		],
		...rest
	} satisfies CutSubject;
};

const content = (change: Partial<CutContent> = {}): CutContent => ({
	format: 'heddle.cut/2',
	study: 's',
	cutOffAt: '2026-03-31T23:30:00.000Z',
	protocolVersion: 1,
	anchor: 'randomisation',
	timeUnit: 'month',
	baselineVisit: 'baseline',
	primaryMeasure: 'weight',
	randomises: true,
	enrolmentPlan: { from: '2026-03', months: 2, sites: [{ site: '01', subjects: 10 }] },
	measures: [],
	characteristics: [],
	sites: [
		{ code: '01', name: 'Northmoor' },
		{ code: '02', name: 'Saltreach' }
	],
	screening: [
		{ outcome: 'entered', reason: null, n: 3 },
		{ outcome: 'in progress', reason: null, n: 2 },
		{ outcome: 'not entered', reason: 'Declined', n: 1 },
		{ outcome: 'not entered', reason: 'declined.', n: 4 }
	],
	subjects: [
		subject('1'),
		subject('2', { measured: false, exits: [{ kind: 'died', on: '2026-03-20' }] }),
		subject('3', { randomisedOn: null }),
		subject('4', { screened: false, site: '02', enrolledOn: '2026-04-01' })
	],
	...change
});

describe('the flow that a cut holds', () => {
	it('counts everybody together, and adds up', () => {
		const held = cutFlow(content(), null);
		expect(held?.flow).toMatchObject({
			assessed: 10,
			inScreening: 2,
			excluded: [{ n: 5 }],
			takenOver: 1,
			enrolled: 4,
			columns: [{ arm: null, n: 3, inFollowUp: 2, measured: 2 }]
		});
		expect(flowBreaks(held?.flow as never)).toEqual([]);
	});

	it('counts by letter where letters are handed in, every letter also when nobody has it', () => {
		const letters = { of: new Map([['1', 'B']]), all: ['B', 'A'] };
		const only = content({ subjects: [subject('1')] });
		expect(cutFlow(only, letters)?.flow.columns.map(({ arm, n }) => [arm, n])).toEqual([
			['Arm A', 0],
			['Arm B', 1]
		]);
		const held = cutFlow(content(), letters);
		expect(held?.flow.columns.map(({ arm, n }) => [arm, n])).toEqual([
			['Arm A', 0],
			['Arm B', 1],
			['Arm not on record', 2]
		]);
		expect(flowBreaks(held?.flow as never)).toEqual([]);
	});

	it('goes against the plan to the month of the cut-off, or of an enrolment that is a day ahead of it', () => {
		const [first, second] = cutFlow(content(), null)?.plan ?? [];
		expect(first).toMatchObject({
			site: 'Northmoor',
			goal: 10,
			months: [
				{ month: '2026-03', planned: 5, enrolled: 3 },
				{ month: '2026-04', planned: 10, enrolled: 3 }
			]
		});
		expect(second?.months.map((month) => month.enrolled)).toEqual([0, 1]);
	});

	it('is not made up for a cut that holds no screening log', () => {
		const { screening: _, ...first } = content();
		expect(cutFlow({ ...first, format: 'heddle.cut/1' }, null)).toBeNull();
	});
});
