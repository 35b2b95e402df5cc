/** Planned and real enrolment, both added up over the months. */
export interface PlanData {
	months: readonly { month: string; planned: number; enrolled: number | null }[];
	/** Where the axis ends; the same for drawings that are compared. */
	most: number;
}

/** The highest count among the months, at least one. */
export const highest = (months: PlanData['months']): number =>
	Math.max(1, ...months.flatMap((each) => [Math.ceil(each.planned), each.enrolled ?? 0]));

/** The drawing in words. */
export function planWords({ months }: Pick<PlanData, 'months'>): string {
	const last = months.findLast((each) => each.enrolled !== null);
	if (!last) return 'Nobody was to be enrolled yet.';
	const planned = months.some((each) => each.planned > 0);
	return `By ${last.month}: ${last.enrolled} enrolled${planned ? `, ${Math.round(last.planned)} planned` : ''}.`;
}
