import type { FlowBox, FlowData } from '$lib/components/charts/flow';
import { total, type Counted, type Flow, type FlowColumn } from './flow';

const capital = (text: string) => text.charAt(0).toUpperCase() + text.slice(1);
const line = ({ label, n }: Counted) => `${capital(label)}: ${n}`;

const columnBox = (flow: Flow, column: FlowColumn): FlowBox => ({
	title: `${column.arm ?? (flow.randomises ? 'All arms together' : 'Everybody enrolled')}: ${column.n}`,
	lines: [
		...(flow.randomises ? [`Stopped the treatment: ${column.discontinued}`] : []),
		...column.ended.map(line),
		`Completed: ${column.completed}`,
		`In follow-up: ${column.inFollowUp}`,
		`With a value of the primary measure: ${column.measured}`
	]
});

/** The flow as boxes, for screen and paper. */
export function flowChart(flow: Flow): FlowData {
	const excluded = total(flow.excluded);
	const notRandomised = total(flow.notRandomised);
	const inside = flow.columns.reduce((sum, column) => sum + column.n, 0);
	return {
		steps: [
			{
				main: { title: `Assessed for eligibility: ${flow.assessed}`, lines: [] },
				side: {
					title: `Not entered: ${excluded}`,
					lines: [
						...flow.excluded.map(line),
						...(flow.inScreening > 0 ? [`Still in screening: ${flow.inScreening}`] : [])
					]
				}
			},
			{
				main: {
					title: `Enrolled: ${flow.enrolled}`,
					lines: flow.takenOver > 0 ? [`Taken over from a file: ${flow.takenOver}`] : []
				},
				side: flow.randomises
					? { title: `Not randomised: ${notRandomised}`, lines: flow.notRandomised.map(line) }
					: null
			},
			...(flow.randomises
				? [{ main: { title: `Randomised: ${inside}`, lines: [] }, side: null }]
				: [])
		],
		columns: flow.columns.map((column) => columnBox(flow, column))
	};
}

/** The same as a table: one row a count. */
export function flowRows(flow: Flow): [string, number][] {
	const inside = flow.columns.reduce((sum, column) => sum + column.n, 0);
	return [
		['Assessed for eligibility', flow.assessed],
		...flow.excluded.map(({ label, n }): [string, number] => [`Not entered: ${label}`, n]),
		['Still in screening', flow.inScreening],
		['Taken over from a file', flow.takenOver],
		['Enrolled', flow.enrolled],
		...flow.notRandomised.map(({ label, n }): [string, number] => [`Not randomised: ${label}`, n]),
		...(flow.randomises ? [['Randomised', inside] as [string, number]] : []),
		...flow.columns.flatMap((column): [string, number][] => {
			const of = column.arm ? `${column.arm}: ` : '';
			return [
				...(column.arm ? [[`${of}all`, column.n] as [string, number]] : []),
				...(flow.randomises
					? [[`${of}stopped the treatment`, column.discontinued] as [string, number]]
					: []),
				...column.ended.map(({ label, n }): [string, number] => [`${of}${label}`, n]),
				[`${of}completed`, column.completed],
				[`${of}in follow-up`, column.inFollowUp],
				[`${of}with a value of the primary measure`, column.measured]
			].map(([label, n]): [string, number] => [capital(String(label)), Number(n)]);
		})
	];
}
