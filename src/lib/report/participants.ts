import { flowWords } from '$lib/components/charts/flow';
import { highest, planWords } from '$lib/components/charts/plan';
import type { CutFlow } from '$lib/domain/flow/cut-flow';
import { allSites, type SitePlan } from '$lib/domain/flow/enrolment-plan';
import { flowBreaks, type Flow } from '$lib/domain/flow/flow';
import { capital, columnRows, flowChart, flowRows, stepRows } from '$lib/domain/flow/flow-chart';
import { count } from './format';
import type { LookReportInput } from './input';
import { heading, paragraph } from './parts';
import type { ReportNode } from './tree';
import { fill, words } from './words';

/** From assessment to the cut-off, and how enrolment went: as the cut holds it, not as it is today. */
export function participants({ flow: held }: LookReportInput): ReportNode[] {
	if (held === undefined) return [];
	if (held === null) return [heading('Participant flow'), paragraph(words.flow.absent)];
	const chart = flowChart(held.flow);
	return [
		heading('Participant flow'),
		...flowBreaks(held.flow).map((said): ReportNode => ({
			kind: 'caution',
			tone: 'warning',
			title: words.flow.breaks.title,
			text: fill(words.flow.breaks.text, { said })
		})),
		{
			kind: 'figure',
			caption: 'From assessment to the cut-off',
			alt: flowWords(chart),
			chart: { type: 'flow', data: chart }
		},
		paragraph(words.flow.what),
		...numbers(held.flow),
		...enrolment(held)
	];
}

/** The counts of the drawing; arms side by side. */
function numbers(flow: Flow): ReportNode[] {
	const byArm = flow.columns.some((column) => column.arm !== null);
	const steps: ReportNode = {
		kind: 'table',
		caption: 'The flow in numbers',
		columns: [
			{ label: 'Step', numeric: false },
			{ label: 'People', numeric: true }
		],
		rows: (byArm ? stepRows(flow) : flowRows(flow)).map(([label, n]) => [label, count(n)])
	};
	if (!byArm) return [steps];
	const columns = flow.columns.map((column) => [
		['randomised', column.n] as const,
		...columnRows(flow, column)
	]);
	return [
		steps,
		{
			kind: 'table',
			caption: 'What became of those randomised, by arm',
			columns: [
				{ label: 'People', numeric: false },
				...flow.columns.map((column) => ({ label: column.arm ?? '', numeric: true }))
			],
			rows: (columns[0] ?? []).map(([label], at) => [
				capital(label),
				...columns.map((rows) => count(rows[at]?.[1] ?? 0))
			])
		}
	];
}

const reached = (site: SitePlan) => site.months.findLast((month) => month.enrolled !== null);

function enrolment({ plan: sites }: CutFlow): ReportNode[] {
	if (sites.length === 0) return [];
	const planned = sites.some((site) => site.goal > 0);
	const whole = allSites(sites);
	const row = (site: SitePlan): string[] => {
		const now = reached(site);
		return [
			site.site,
			count(now?.enrolled ?? 0),
			...(planned ? [count(Math.round(now?.planned ?? 0)), count(site.goal)] : [])
		];
	};
	return [
		heading(planned ? 'Enrolment against plan' : 'Enrolment', 2),
		{
			kind: 'figure',
			caption: `Enrolled at all sites, added up by month${planned ? '; dashed: planned' : ''}`,
			alt: planWords(whole),
			chart: { type: 'plan', data: { months: whole.months, most: highest(whole.months) } }
		},
		{
			kind: 'table',
			caption: 'Enrolment by site',
			columns: [
				{ label: 'Site', numeric: false },
				{ label: 'Enrolled', numeric: true },
				...(planned
					? [
							{ label: 'Planned by then', numeric: true },
							{ label: 'Planned in all', numeric: true }
						]
					: [])
			],
			rows: [...sites.map(row), ...(sites.length > 1 ? [row(whole)] : [])],
			...(planned ? {} : { note: words.flow.noPlan })
		}
	];
}
