import { normalAbove } from '../numeric/distribution-normal.js';
import { lastDue, lastObserved, type Occasions } from './occasions.js';

/** Whether the last outcome seen tells who leaves next. */
export interface HistoryTest {
	/** Subjects who left, and of whom the stratum held somebody to compare with. */
	left: number;
	/** Comparisons: outcomes of those at risk, over the strata in which somebody left and somebody stayed. */
	atRisk: number;
	/**
	 * Last outcome of those who left less the average of all at risk at that visit in that group, averaged over those who
	 * left; outcome unit.
	 */
	meanDifference: number;
	/** Log odds of leaving per outcome unit, one step from zero. */
	logOdds: number;
	z: number;
	/** Two-sided. */
	p: number;
}

/** Outcomes at one visit in one group, and whose was the last. */
interface Stratum {
	outcomes: number[];
	left: boolean[];
}

function strataOf(occasions: Occasions): Stratum[] {
	const { visits, subjects, state, outcome, group } = occasions;
	const k = visits.length;
	const strata = new Map<number, Stratum>();
	subjects.forEach((_, s) => {
		const last = lastObserved(occasions, s);
		const due = lastDue(occasions, s);
		// The last visit due ends nobody's course, whatever was seen there.
		for (let v = 0; v <= Math.min(last, due - 1); v++) {
			if (state[s * k + v] !== 'observed') continue;
			const key = (group[s]! + 1) * k + v;
			const stratum = strata.get(key) ?? { outcomes: [], left: [] };
			stratum.outcomes.push(outcome[s * k + v]!);
			stratum.left.push(v === last);
			strata.set(key, stratum);
		}
	});
	return [...strata.values()];
}

/**
 * A test of whether leaving depends on the outcome seen just before, or null when nobody left beside somebody who stayed.
 *
 * At each visit and in each group, those who were seen and never again are compared with all who were seen: the score test
 * of a logistic regression of leaving on the last outcome, with a level of its own for each visit and group, conditional
 * on how many left. A subject enters once for each visit seen; given the past these terms are uncorrelated when leaving
 * does not depend on outcomes, so their variances add. A small p says that outcomes are not missing completely at random; a
 * large one does not say that they are, and no test tells whether the unseen outcomes matter besides.
 * Source: Diggle (1989), Biometrics 45:1255-1258; Ridout (1991), Biometrics 47:1617-1621; conditional score of stratified
 * logistic regression, Breslow & Day (1980), Statistical Methods in Cancer Research I, ch. 7 (all from memory).
 */
export function historyTest(occasions: Occasions): HistoryTest | null {
	let score = 0;
	let variance = 0;
	let left = 0;
	let atRisk = 0;
	for (const stratum of strataOf(occasions)) {
		const n = stratum.outcomes.length;
		const gone = stratum.left.filter(Boolean).length;
		if (gone === 0 || gone === n) continue;
		// About the first outcome, so that a far origin costs no digits.
		const origin = stratum.outcomes[0]!;
		const mean = origin + stratum.outcomes.reduce((a, y) => a + (y - origin), 0) / n;
		let spread = 0;
		stratum.outcomes.forEach((y, i) => {
			spread += (y - mean) ** 2;
			if (stratum.left[i]) score += y - mean;
		});
		variance += (gone * (n - gone) * spread) / (n * (n - 1));
		left += gone;
		atRisk += n;
	}
	if (!(variance > 0)) return null;
	const z = score / Math.sqrt(variance);
	return {
		left,
		atRisk,
		meanDifference: score / left,
		logOdds: score / variance,
		z,
		p: 2 * normalAbove(Math.abs(z))
	};
}
