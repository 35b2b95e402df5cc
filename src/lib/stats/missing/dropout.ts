import { Matrix } from 'ml-matrix';
import { chiSquareAbove } from '../numeric/distribution.js';
import { factorise, form } from '../numeric/symmetric.js';
import { lastDue, lastObserved, type Occasions } from './occasions.js';

/** One step from a visit to the next in one group. */
export interface DropoutStep {
	/** Last visit at which those who drop out here were seen. */
	from: string;
	/** Seen at this visit or later, and due at a later one. */
	atRisk: number;
	/** Never seen after it. */
	dropped: number;
	/** Share not dropped out after this step; 1 before any. */
	remaining: number;
}

export interface DropoutByGroup {
	/** One for each group (a single one of no name without groups): its steps in the order of visits. */
	groups: { group: string | null; steps: DropoutStep[] }[];
	/** Whether groups drop out alike; null with one group, or when nobody does. */
	comparison: { statistic: number; df: number; p: number } | null;
}

/** By visit and group: how many were at risk of dropping out after it, and did. */
function countSteps(occasions: Occasions) {
	const { visits, subjects, group, groups } = occasions;
	const size = Math.max(1, groups.length);
	const steps = visits.slice(0, -1).map(() => ({
		atRisk: new Array<number>(size).fill(0),
		dropped: new Array<number>(size).fill(0)
	}));
	subjects.forEach((_, s) => {
		const g = group[s]!;
		const last = lastObserved(occasions, s);
		if (g < 0 || last < 0) return;
		const due = lastDue(occasions, s);
		// After the last visit due nobody can drop out any more.
		for (let v = 0; v <= Math.min(last, due - 1); v++) steps[v]!.atRisk[g]!++;
		if (last < due) steps[last]!.dropped[g]!++;
	});
	return steps;
}

const sum = (values: readonly number[]) => values.reduce((a, b) => a + b, 0);

/** Observed less expected dropouts, visit by visit given the totals: hypergeometric mean and covariance. */
function compare(
	steps: ReturnType<typeof countSteps>,
	groups: number
): DropoutByGroup['comparison'] {
	const excess = new Array<number>(groups).fill(0);
	const covariance = Matrix.zeros(groups, groups);
	for (const { atRisk, dropped } of steps) {
		const n = sum(atRisk);
		const d = sum(dropped);
		if (n < 2 || d === 0) continue;
		const factor = (d * (n - d)) / (n - 1);
		for (let a = 0; a < groups; a++) {
			excess[a]! += dropped[a]! - (d * atRisk[a]!) / n;
			for (let b = 0; b < groups; b++) {
				const share = (atRisk[a]! / n) * ((a === b ? 1 : 0) - atRisk[b]! / n);
				covariance.set(a, b, covariance.get(a, b) + factor * share);
			}
		}
	}
	// The excesses add up to zero: one group says nothing new, and one never at risk with others says nothing at all.
	const free = excess.flatMap((_, a) => (covariance.get(a, a) > 0 ? [a] : [])).slice(1);
	if (free.length === 0) return null;
	const factored = factorise(covariance.selection(free, free));
	if (!factored) return null;
	const statistic = form(
		free.map((a) => excess[a]!),
		factored.inverse
	);
	return { statistic, df: free.length, p: chiSquareAbove(statistic, free.length) };
}

/**
 * Who leaves for good, after which visit, group by group, and whether the groups leave alike.
 *
 * The comparison is the log-rank test over visits (a chi-squared on groups − 1 degrees of freedom), which is the score test
 * of a discrete-time hazard with an effect of group.
 * Source: Mantel (1966), Cancer Chemotherapy Reports 50:163-170; Cox (1972), JRSS B 34:187-220 (from memory).
 */
export function dropoutByGroup(occasions: Occasions): DropoutByGroup {
	const steps = countSteps(occasions);
	const names = occasions.groups.length > 0 ? occasions.groups : [null];
	return {
		groups: names.map((group, g) => {
			let remaining = 1;
			return {
				group,
				steps: steps.map(({ atRisk, dropped }, v) => {
					if (atRisk[g]! > 0) remaining *= 1 - dropped[g]! / atRisk[g]!;
					return {
						from: occasions.visits[v]!,
						atRisk: atRisk[g]!,
						dropped: dropped[g]!,
						remaining
					};
				})
			};
		}),
		comparison: compare(steps, names.length)
	};
}
