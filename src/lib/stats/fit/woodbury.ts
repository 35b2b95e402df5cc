/**
 * What subject effects do to one subject's moments, by Woodbury on their q × q covariance G (q ≤ 2, units of σ²).
 *
 * With B = Z'R⁻¹A (q × c), C = Z'R⁻¹Z and K = G(I + CG)⁻¹: A'V⁻¹A = A'R⁻¹A − B'KB, log|V| = log|R| + log|I + CG|.
 */
export interface Effect {
	/** K, q × q, symmetric. */
	k: Float64Array;
	/** I − CK = (I + CG)⁻¹, q × q. */
	j: Float64Array;
	logDeterminant: number;
}

export function effectOf(g: Float64Array, cc: Float64Array, q: number, out: Effect): Effect {
	if (q === 1) {
		const d = 1 + cc[0]! * g[0]!;
		out.k[0] = g[0]! / d;
		out.j[0] = 1 / d;
		out.logDeterminant = Math.log(d);
		return out;
	}
	const [c0, c1, c3] = [cc[0]!, cc[1]!, cc[3]!];
	const [g0, g1, g3] = [g[0]!, g[1]!, g[3]!];
	// I + CG
	const a = 1 + c0 * g0 + c1 * g1;
	const b = c0 * g1 + c1 * g3;
	const c = c1 * g0 + c3 * g1;
	const d = 1 + c1 * g1 + c3 * g3;
	// |I + CG| = 1 + tr(CG) + |C||G|, without the cancellation of ad − bc.
	const detC = Math.max(0, c0 * c3 - c1 * c1);
	const detG = Math.max(0, g0 * g3 - g1 * g1);
	const det = 1 + c0 * g0 + 2 * c1 * g1 + c3 * g3 + detC * detG;
	out.j[0] = d / det;
	out.j[1] = -b / det;
	out.j[2] = -c / det;
	out.j[3] = a / det;
	// G(I + CG)⁻¹ = (G + |G| adj(C)) / |I + CG|
	out.k[0] = (g0 + detG * c3) / det;
	out.k[1] = out.k[2] = (g1 - detG * c1) / det;
	out.k[3] = (g3 + detG * c0) / det;
	out.logDeterminant = Math.log(det);
	return out;
}

export const emptyEffect = (q: number): Effect => ({
	k: new Float64Array(q * q),
	j: new Float64Array(q * q),
	logDeterminant: 0
});

/** Adds to `g` the slope in G, J(C − B H B'J')…: J C − (JB)H(JB)' for one subject or a class of `count`. */
export function addEffectSlope(
	g: Float64Array,
	q: number,
	count: number,
	cc: Float64Array,
	bhb: Float64Array,
	effect: Effect
): void {
	const { j } = effect;
	for (let a = 0; a < q; a++)
		for (let b = 0; b < q; b++) {
			let sum = 0;
			for (let e = 0; e < q; e++) {
				sum += count * j[a * q + e]! * cc[e * q + b]!;
				for (let f = 0; f < q; f++) sum -= j[a * q + e]! * bhb[e * q + f]! * j[b * q + f]!;
			}
			g[a * q + b]! += sum;
		}
}
