import type { FlowBox, FlowData } from '$lib/components/charts/flow';
import { total, type Counted, type Flow, type FlowColumn } from './flow';

/** A word that begins small on purpose stays so: eGFR, pH. */
export const capital = (text: string) =>
	/^\p{Ll}\p{Lu}/u.test(text) ? text : text.charAt(0).toUpperCase() + text.slice(1);
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

/** The steps that everybody goes through, one row a count. */
export function stepRows(flow: Flow): [string, number][] {
	const inside = flow.columns.reduce((sum, column) => sum + column.n, 0);
	return [
		['Assessed for eligibility', flow.assessed],
		...flow.excluded.map(({ label, n }): [string, number] => [`Not entered: ${label}`, n]),
		['Still in screening', flow.inScreening],
		['Taken over from a file', flow.takenOver],
		['Enrolled', flow.enrolled],
		...flow.notRandomised.map(({ label, n }): [string, number] => [`Not randomised: ${label}`, n]),
		...(flow.randomises ? [['Randomised', inside] as [string, number]] : [])
	];
}

/** What became of those in one column; the same rows for every column of a flow. */
export function columnRows(flow: Flow, column: FlowColumn): [string, number][] {
	return [
		...(flow.randomises
			? [['stopped the treatment', column.discontinued] as [string, number]]
			: []),
		...column.ended.map(({ label, n }): [string, number] => [label, n]),
		['completed', column.completed],
		['in follow-up', column.inFollowUp],
		['with a value of the primary measure', column.measured]
	];
}

/** The same as a table: one row a count. */
export function flowRows(flow: Flow): [string, number][] {
	return [
		...stepRows(flow),
		...flow.columns.flatMap((column) => {
			const of = column.arm ? `${column.arm}: ` : '';
			return [
				...(column.arm ? [['all', column.n] as [string, number]] : []),
				...columnRows(flow, column)
			].map(([label, n]): [string, number] => [capital(`${of}${label}`), n]);
		})
	];
}
