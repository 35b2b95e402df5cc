import { describe, expect, test } from 'vitest';
import { flowGeometry, flowWords } from '../../components/charts/flow';
import { exitKinds } from '../subject/exit';
import { enrolmentAgainstPlan, nextMonth } from './enrolment-plan';
import { flowBreaks, flowOf, reasonsOf, total, type FlowScreening, type FlowSubject } from './flow';
import { flowChart, flowRows } from './flow-chart';

/** A repeatable stream: the same studies each time. */
function stream(seed: number) {
	let state = seed;
	return (below: number) => {
		state = (Math.imul(state, 1103515245) + 12345) & 0x7fffffff;
		return Math.floor((state / 0x80000000) * below);
	};
}

function study(seed: number, randomises: boolean, arms: string[] | null) {
	const draw = stream(seed);
	const subjects: FlowSubject[] = Array.from({ length: draw(60) }, () => {
		const randomised = randomises && draw(4) > 0;
		return {
			screened: draw(5) > 0,
			randomised,
			arm: randomised && arms ? (arms[draw(arms.length)] as string) : null,
			exits: exitKinds.filter(() => draw(5) === 0),
			measured: draw(3) > 0
		};
	});
	const screenings: FlowScreening[] = [
		...subjects
			.filter((each) => each.screened)
			.map((): FlowScreening => ({ outcome: 'entered', reason: null })),
		...Array.from({ length: draw(40) }, (): FlowScreening =>
			draw(3) === 0
				? { outcome: 'in progress', reason: null }
				: { outcome: 'not entered', reason: `Reason ${draw(14)}` }
		)
	];
	return { subjects, screenings };
}

describe('R-77: the counts reconcile exactly', () => {
	test.each([
		['pooled', true, null],
		['by arm', true, ['A', 'B', 'C']],
		['one arm', false, null]
	] as const)('in 400 invented studies, %s', (_, randomises, arms) => {
		for (let seed = 1; seed <= 400; seed++) {
			const { subjects, screenings } = study(seed, randomises, arms ? [...arms] : null);
			const flow = flowOf(screenings, subjects, { randomises, arms: arms ? [...arms] : null });
			expect(flowBreaks(flow)).toEqual([]);
			// Against a plain count of the same people.
			expect(total(flow.excluded)).toBe(
				screenings.filter((each) => each.outcome === 'not entered').length
			);
			expect(flow.columns.reduce((sum, column) => sum + column.discontinued, 0)).toBe(
				subjects.filter(
					(each) =>
						(!randomises || each.randomised) && each.exits.includes('intervention discontinued')
				).length
			);
			const died = flow.columns.reduce(
				(sum, column) => sum + (column.ended.find(({ label }) => label === 'died')?.n ?? 0),
				0
			);
			expect(died).toBe(
				subjects.filter((each) => (!randomises || each.randomised) && each.exits.includes('died'))
					.length
			);
		}
	});
	test('a sum that does not hold is named', () => {
		const { subjects, screenings } = study(7, true, null);
		const flow = flowOf(screenings, subjects, { randomises: true, arms: null });
		expect(flowBreaks({ ...flow, enrolled: flow.enrolled + 1 })).toHaveLength(2);
	});
	test('an arm that is not known is missed, not hidden', () => {
		const subject: FlowSubject = {
			screened: true,
			randomised: true,
			arm: null,
			exits: [],
			measured: false
		};
		const flow = flowOf([{ outcome: 'entered', reason: null }], [subject], {
			randomises: true,
			arms: ['A']
		});
		expect(flowBreaks(flow)).toHaveLength(1);
	});
});

test('reasons are counted together but for capitals and a full stop; rare ones in one line', () => {
	expect(reasonsOf(['Too old.', 'too old', 'Moved away'])).toEqual([
		{ label: 'Too old', n: 2 },
		{ label: 'Moved away', n: 1 }
	]);
	const many = reasonsOf(Array.from({ length: 12 }, (_, at) => `Reason ${at}`));
	expect(many).toHaveLength(8);
	expect(total(many)).toBe(12);
});

test('the diagram draws every count within its frame, wide and narrow', () => {
	const { subjects, screenings } = study(11, true, ['A', 'B']);
	const flow = flowOf(screenings, subjects, { randomises: true, arms: ['A', 'B'] });
	const data = flowChart(flow);
	for (const width of [320, 640, 960]) {
		const drawn = flowGeometry(data, width);
		const boxes = drawn.boxes;
		for (const box of boxes) {
			expect(box.x).toBeGreaterThanOrEqual(0);
			expect(box.x + box.width).toBeLessThanOrEqual(width);
			expect(box.y + box.height).toBeLessThanOrEqual(drawn.height);
		}
		for (const [at, one] of boxes.entries())
			for (const other of boxes.slice(at + 1)) {
				const apart =
					one.x + one.width <= other.x ||
					other.x + other.width <= one.x ||
					one.y + one.height <= other.y ||
					other.y + other.height <= one.y;
				expect(apart).toBe(true);
			}
	}
	expect(flowWords(data)).toContain(`Enrolled: ${flow.enrolled}`);
	expect(flowRows(flow)).toContainEqual(['Enrolled', flow.enrolled]);
});

test('enrolment against plan: even over the months, added up, nothing for months to come', () => {
	expect(nextMonth('2026-12')).toBe('2027-01');
	const [site] = enrolmentAgainstPlan(
		{ from: '2026-01', months: 4, sites: [{ site: '01', subjects: 20 }] },
		[{ code: '01', name: 'Northmoor' }],
		[
			{ site: '01', month: '2025-12', n: 1 },
			{ site: '01', month: '2026-02', n: 6 }
		],
		'2026-03'
	);
	expect(site?.months.map((each) => [each.month, each.planned, each.enrolled])).toEqual([
		['2025-12', 0, 1],
		['2026-01', 5, 1],
		['2026-02', 10, 7],
		['2026-03', 15, 7],
		['2026-04', 20, null]
	]);
	expect(enrolmentAgainstPlan(undefined, [], [], '2026-03')).toEqual([]);
});
