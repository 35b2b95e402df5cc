import type { Comparison, EvidencePart, EvidencePlan } from './types.js';

/** Gains closer than this are the same: models that coincide differ by rounding and by where searches end. */
const SAME = 1e-5;

/** The value a share of the way through sorted numbers, by linear interpolation. */
function quantile(sorted: readonly number[], share: number): number {
	const at = share * (sorted.length - 1);
	const below = Math.floor(at);
	const [a, b] = [sorted[below]!, sorted[Math.min(below + 1, sorted.length - 1)]!];
	return a + (at - below) * (b - a);
}

/** Every comparison of a plan with where its gain falls among the refits; p as `Comparison` says. */
export function comparisonsOf(plan: EvidencePlan, whole: EvidencePart): Comparison[] {
	const observed = new Map(plan.members.map((m) => [m.member.id, m.logLikelihood]));
	const count = whole.to - whole.from;
	return plan.comparisons.map(({ name, held, rivals, under, tail, mixture }) => {
		const w = plan.worlds.findIndex((world) => world.id === under);
		const at = (id: string) => plan.worlds[w]!.refit.indexOf(id);
		const { logLikelihood, failed } = whole.worlds[w]!;
		const gain = Math.max(...rivals.map((id) => observed.get(id)!)) - observed.get(held)!;
		const columns = [held, ...rivals].map(at);
		const gains: number[] = [];
		let far = 0;
		for (let k = 0; k < count; k++) {
			if (columns.some((m) => failed[m]![k] === 1)) {
				far++;
				continue;
			}
			const drawn =
				Math.max(...rivals.map((id) => logLikelihood[at(id)]![k]!)) - logLikelihood[at(held)]![k]!;
			gains.push(drawn);
			if (tail === 'at-least' ? drawn >= gain - SAME : drawn <= gain + SAME) far++;
		}
		const p = (1 + far) / (1 + count);
		const sorted = gains.sort((a, b) => a - b);
		return {
			name,
			held,
			rivals,
			under,
			tail,
			observed: gain,
			refits: count,
			failed: count - sorted.length,
			p,
			monteCarloError: Math.sqrt((p * (1 - p)) / (1 + count)),
			quantiles:
				sorted.length === 0
					? null
					: {
							lower: quantile(sorted, 0.05),
							middle: quantile(sorted, 0.5),
							upper: quantile(sorted, 0.95)
						},
			mixture
		};
	});
}
