import type { StudyDefinition } from '../study/definition';

type Plan = NonNullable<StudyDefinition['enrolmentPlan']>;

export interface PlanMonth {
	/** '2026-06' */
	month: string;
	/** Enrolled by the end of the month by plan: spread evenly over its months. */
	planned: number;
	/** Enrolled by the end of the month; null for months that have not begun. */
	enrolled: number | null;
	inMonth: number;
}

export interface SitePlan {
	site: string;
	goal: number;
	months: PlanMonth[];
}

/** The month after. */
export function nextMonth(month: string): string {
	const [year = 0, number = 0] = month.split('-').map(Number);
	return number === 12
		? `${String(year + 1).padStart(4, '0')}-01`
		: `${String(year).padStart(4, '0')}-${String(number + 1).padStart(2, '0')}`;
}

const mostMonths = 240;

/**
 * Enrolment against plan at each site, month by month and added up. Months run from the earlier of the plan's beginning
 * and the first enrolment to the later of its end and this month.
 */
export function enrolmentAgainstPlan(
	plan: Plan | undefined,
	sites: readonly { code: string; name: string }[],
	enrolled: readonly { site: string; month: string; n: number }[],
	thisMonth: string
): SitePlan[] {
	const first = [plan?.from, ...enrolled.map((each) => each.month)]
		.filter((month): month is string => month !== undefined)
		.sort()[0];
	if (first === undefined) return [];
	const planned: string[] = [];
	for (
		let month = plan?.from;
		month && planned.length < (plan?.months ?? 0);
		month = nextMonth(month)
	)
		planned.push(month);
	const last = [planned.at(-1) ?? first, thisMonth, ...enrolled.map((each) => each.month)]
		.sort()
		.at(-1) as string;
	const months: string[] = [];
	for (let month = first; month <= last && months.length < mostMonths; month = nextMonth(month))
		months.push(month);
	return sites.map((site) => {
		const goal = plan?.sites.find((each) => each.site === site.code)?.subjects ?? 0;
		let sum = 0;
		return {
			site: site.name,
			goal,
			months: months.map((month) => {
				const inMonth = enrolled
					.filter((each) => each.site === site.code && each.month === month)
					.reduce((all, each) => all + each.n, 0);
				sum += inMonth;
				const passed = planned.filter((each) => each <= month).length;
				return {
					month,
					planned: planned.length === 0 ? 0 : (goal * passed) / planned.length,
					enrolled: month <= thisMonth ? sum : null,
					inMonth
				};
			})
		};
	});
}
