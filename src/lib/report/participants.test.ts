import { describe, expect, test } from 'vitest';
import { byArm, flowHeld, lookInput } from '../../../tests/unit/pdf-fixture';
import { ReportFault } from './input';
import { lookReport } from './look-report';
import { reportText, type ReportNode, type ReportTree } from './tree';

/** The part under a heading of the first level. */
function part(tree: ReportTree, title: string): ReportNode[] {
	const from = tree.body.findIndex((node) => node.kind === 'heading' && node.text === title);
	if (from < 0) return [];
	const rest = tree.body.slice(from + 1);
	const to = rest.findIndex((node) => node.kind === 'heading' && node.level === 1);
	return rest.slice(0, to < 0 ? undefined : to);
}
const rows = (nodes: ReportNode[], caption: string) => {
	const table = nodes.find((node) => node.kind === 'table' && node.caption === caption);
	return table?.kind === 'table' ? table.rows : [];
};

describe('the flow of participants in a report', () => {
	test('is drawn before anything is estimated, with words for the drawing and the numbers beside it', () => {
		const tree = lookReport(lookInput({ flow: flowHeld() }));
		const firstHeads = tree.body.flatMap((node) =>
			node.kind === 'heading' && node.level === 1 ? [node.text] : []
		);
		expect(firstHeads.slice(0, 3)).toEqual([
			'What was asked',
			'Participant flow',
			'People and measurements'
		]);
		const nodes = part(tree, 'Participant flow');
		const [flow, plan] = nodes.filter((node) => node.kind === 'figure');
		expect(flow?.alt).toContain('Assessed for eligibility: 40.');
		expect(flow?.alt).toContain('All arms together: 25');
		expect(plan?.alt).toBe('By 2026-06: 27 enrolled, 48 planned.');
		expect(rows(nodes, 'The flow in numbers')).toEqual(
			expect.arrayContaining([
				['Assessed for eligibility', '40'],
				['Not entered: Declined', '3'],
				['Enrolled', '27'],
				['Not randomised: left before', '1'],
				['Randomised', '25'],
				['Lost to follow-up', '2']
			])
		);
		expect(rows(nodes, 'Enrolment by site')).toEqual([
			['Northmoor', '16', '30', '30'],
			['Saltreach', '11', '18', '18'],
			['All sites', '27', '48', '48']
		]);
		expect(reportText(tree)).toContain('Randomised: 25');
	});

	test('a closed report counts by arm, in letters; an open one may not', () => {
		const held = flowHeld(['Arm A', 'Arm B']);
		const nodes = part(lookReport(byArm({ flow: held })), 'Participant flow');
		expect(rows(nodes, 'What became of those randomised, by arm')).toEqual([
			['Randomised', '13', '12'],
			['Stopped the treatment', '1', '1'],
			['Died', '0', '0'],
			['Consent withdrawn', '1', '1'],
			['Lost to follow-up', '2', '2'],
			['Stopped visits', '0', '0'],
			['Completed', '3', '3'],
			['In follow-up', '7', '6'],
			['With a value of the primary measure', '12', '11']
		]);
		expect(rows(nodes, 'The flow in numbers').at(-1)).toEqual(['Randomised', '25']);
		expect(() => lookReport(lookInput({ flow: held }))).toThrow(ReportFault);
		expect(() =>
			lookReport(lookInput({ kind: 'open', group: undefined as never, flow: held }))
		).toThrow(/pooled/);
	});

	test('a reason that names an arm is refused in a report coded by letter', () => {
		const held = flowHeld(['Arm A', 'Arm B']);
		held.flow.excluded = [{ label: 'Wanted Venatrol', n: 11 }];
		expect(() => lookReport(byArm({ flow: held }))).toThrow(/named in the words/);
	});

	test('counts that do not add up are said to, and a cut without a screening log says so', () => {
		const held = flowHeld();
		held.flow.assessed = 41;
		expect(
			part(lookReport(lookInput({ flow: held })), 'Participant flow').find(
				(node) => node.kind === 'caution'
			)
		).toMatchObject({ tone: 'warning', text: expect.stringContaining('41 against 40') });
		const absent = part(lookReport(lookInput({ flow: null })), 'Participant flow');
		expect(absent).toHaveLength(1);
		expect(absent[0]).toMatchObject({ kind: 'paragraph' });
		expect(part(lookReport(lookInput()), 'Participant flow')).toEqual([]);
	});

	test('without a plan only what was reached is printed, and nothing without anybody enrolled', () => {
		const held = flowHeld();
		const unplanned = {
			...held,
			plan: held.plan.map((site) => ({
				...site,
				goal: 0,
				months: site.months.map((month) => ({ ...month, planned: 0 }))
			}))
		};
		const nodes = part(lookReport(lookInput({ flow: unplanned })), 'Participant flow');
		expect(rows(nodes, 'Enrolment by site')[0]).toEqual(['Northmoor', '16']);
		expect(nodes.findLast((node) => node.kind === 'figure')).toMatchObject({
			alt: 'By 2026-06: 27 enrolled.'
		});
		const empty = part(lookReport(lookInput({ flow: { ...held, plan: [] } })), 'Participant flow');
		expect(empty.filter((node) => node.kind === 'figure')).toHaveLength(1);
	});
});
