/**
 * Kit stock in numbers over all arms. A site holds each arm up to a level in the study's ratio; a delivery tops up to it.
 * As long as fewer kits are gone than the smallest arm's level, each arm is there: what is refused, and when a site is
 * filled up, follows from the total alone.
 */
export interface Ratio {
	ratio: number;
}

export const ratioSum = (arms: readonly Ratio[]): number =>
	arms.reduce((sum, arm) => sum + arm.ratio, 0);

/** How many kits may be gone from a full stock while every arm is certainly there. */
export const spareKits = (arms: readonly Ratio[], full: number): number =>
	Math.floor((full * Math.min(...arms.map((arm) => arm.ratio))) / ratioSum(arms));

/** The fewest kits with which somebody may still be randomised. */
export const leastKits = (arms: readonly Ratio[], full: number): number =>
	full - spareKits(arms, full) + 1;

/** Why a full stock and its re-supply level do not go together, by field; nothing when they do. */
export function levelErrors(
	arms: readonly Ratio[],
	{ fullStock, resupplyAt }: { fullStock: number; resupplyAt: number }
): Record<string, string> {
	const sum = ratioSum(arms);
	if (fullStock % sum !== 0)
		return {
			fullStock: `Give a multiple of ${sum}, so that the arms’ kits stand in the study’s ratio.`
		};
	const least = leastKits(arms, fullStock);
	if (resupplyAt < least || resupplyAt >= fullStock)
		return {
			resupplyAt: `Give a number from ${least} to ${fullStock - 1}: with fewer than ${least} nobody can be randomised.`
		};
	return {};
}
