/**
 * How −2 log-likelihood and the precision of the mean bend with the covariance's parameters at the estimates.
 *
 * In coordinates of the mean in which its covariance is the unit matrix (X̂), V in units of σ²; K active parameters.
 * Notation: Kenward & Roger (1997), Biometrics 53:983-997, section 2.
 */
export interface CurvatureSums {
	/** Active parameters. */
	count: number;
	p: number;
	/** tr(V⁻¹V_k). */
	trace: Float64Array;
	/** [X̂ r]'V⁻¹V_kV⁻¹[X̂ r], (p + 1)² each: −P_k in its upper left. */
	first: Float64Array[];
	/** K × K: tr(V⁻¹V_kV⁻¹V_l). */
	traces: Float64Array;
	/** K × K: tr(Q_kl). */
	meanTraces: Float64Array;
	/** K × K: r'V⁻¹V_kV⁻¹V_lV⁻¹r. */
	squares: Float64Array;
	/** K × K each: tr(V⁻¹V_kl), tr(R_kl) and r'V⁻¹V_klV⁻¹r of the second derivatives. */
	bendTraces: Float64Array;
	bendMeanTraces: Float64Array;
	bendSquares: Float64Array;
	/** Σ_kl w_kl (Q_kl − R_kl / 4), p × p, for symmetric weights w (K × K); without R when `bends` is false. */
	weighted(w: Float64Array, bends?: boolean): Float64Array;
}
