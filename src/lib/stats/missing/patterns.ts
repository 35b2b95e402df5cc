import { lastDue, lastObserved, type OccasionState, type Occasions } from './occasions.js';

/**
 * `complete`: every due visit was observed. `dropout`: none after the last observed one, and no gap before it.
 * `gap`: seen again after a miss, and seen at the last due visit. `gap-and-dropout`: both. `never`: no outcome at all.
 */
export type PatternKind = 'complete' | 'dropout' | 'gap' | 'gap-and-dropout' | 'never';

/** Subjects whose visits came out alike. */
export interface MissingPattern {
	/** One for each visit. */
	states: OccasionState[];
	kind: PatternKind;
	subjects: number;
	/** In the order of the groups; empty without any. Subjects of unknown group are in `subjects` only. */
	byGroup: number[];
}

function kindOf(occasions: Occasions, subject: number): PatternKind {
	const last = lastObserved(occasions, subject);
	if (last < 0) return 'never';
	const k = occasions.visits.length;
	let gap = false;
	for (let v = 0; v < last; v++) if (occasions.state[subject * k + v] === 'missing') gap = true;
	const left = last < lastDue(occasions, subject);
	if (gap) return left ? 'gap-and-dropout' : 'gap';
	return left ? 'dropout' : 'complete';
}

/** The patterns of observed and missing visits, most frequent first, ties by the visits observed earliest. */
export function missingPatterns(occasions: Occasions): MissingPattern[] {
	const { state, subjects, visits, groups, group } = occasions;
	const k = visits.length;
	const patterns = new Map<string, MissingPattern>();
	subjects.forEach((_, s) => {
		const states = state.slice(s * k, (s + 1) * k);
		const key = states
			.map((one) => ({ observed: 'a', missing: 'b', 'not-due': 'c' })[one])
			.join('');
		let pattern = patterns.get(key);
		if (!pattern) {
			pattern = { states, kind: kindOf(occasions, s), subjects: 0, byGroup: groups.map(() => 0) };
			patterns.set(key, pattern);
		}
		pattern.subjects++;
		if (groups.length > 0 && group[s]! >= 0) pattern.byGroup[group[s]!]!++;
	});
	return [...patterns]
		.sort(([a, left], [b, right]) => right.subjects - left.subjects || (a < b ? -1 : 1))
		.map(([, pattern]) => pattern);
}
