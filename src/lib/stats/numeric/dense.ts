/** Small dense matrices as row-major Float64Arrays, for loops that run too often for objects. */

/**
 * Puts the lower Cholesky factor of the symmetric n × n matrix `a` in its lower half; −1, or the row whose pivot
 * is not positive: not above `least` of the diagonal it came from. The upper half is left as it was.
 */
export function choleskyInPlace(a: Float64Array, n: number, least = 1e-15): number {
	for (let j = 0; j < n; j++) {
		const rj = j * n;
		let d = a[rj + j]!;
		const whole = d;
		for (let k = 0; k < j; k++) d -= a[rj + k]! * a[rj + k]!;
		if (!(d > least * whole) || !Number.isFinite(d)) return j;
		const root = Math.sqrt(d);
		a[rj + j] = root;
		for (let i = j + 1; i < n; i++) {
			const ri = i * n;
			let s = a[ri + j]!;
			for (let k = 0; k < j; k++) s -= a[ri + k]! * a[rj + k]!;
			a[ri + j] = s / root;
		}
	}
	return -1;
}

/** log|LL'| of a lower factor (n × n). */
export function logDeterminantOf(l: Float64Array, n: number): number {
	let sum = 0;
	for (let i = 0; i < n; i++) sum += Math.log(l[i * n + i]!);
	return 2 * sum;
}

/** L⁻¹B in place: `b` is n × w, row-major. */
export function solveLower(l: Float64Array, n: number, b: Float64Array, w: number): void {
	for (let i = 0; i < n; i++) {
		const ri = i * w;
		for (let k = 0; k < i; k++) {
			const f = l[i * n + k]!;
			if (f === 0) continue;
			const rk = k * w;
			for (let c = 0; c < w; c++) b[ri + c]! -= f * b[rk + c]!;
		}
		const d = 1 / l[i * n + i]!;
		for (let c = 0; c < w; c++) b[ri + c]! *= d;
	}
}

/** L⁻ᵀB in place: `b` is n × w, row-major. */
export function solveUpper(l: Float64Array, n: number, b: Float64Array, w: number): void {
	for (let i = n - 1; i >= 0; i--) {
		const ri = i * w;
		for (let k = i + 1; k < n; k++) {
			const f = l[k * n + i]!;
			if (f === 0) continue;
			const rk = k * w;
			for (let c = 0; c < w; c++) b[ri + c]! -= f * b[rk + c]!;
		}
		const d = 1 / l[i * n + i]!;
		for (let c = 0; c < w; c++) b[ri + c]! *= d;
	}
}

/** (LL')⁻¹, n × n and full, from the lower factor. */
export function inverseFromFactor(l: Float64Array, n: number): Float64Array {
	const inverse = new Float64Array(n * n);
	for (let i = 0; i < n; i++) inverse[i * n + i] = 1;
	solveLower(l, n, inverse, n);
	solveUpper(l, n, inverse, n);
	return inverse;
}

/** Inverse and log-determinant of a symmetric positive definite n × n matrix, its diagonal scaled to 1; or null. */
export function invertPositive(
	a: ArrayLike<number>,
	n: number
): { inverse: Float64Array; logDeterminant: number } | null {
	const scale = new Float64Array(n);
	let logScale = 0;
	for (let i = 0; i < n; i++) {
		const d = a[i * n + i]!;
		if (!(d > 0) || !Number.isFinite(d)) return null;
		scale[i] = 1 / Math.sqrt(d);
		logScale += Math.log(d);
	}
	const l = new Float64Array(n * n);
	for (let i = 0; i < n; i++)
		for (let j = 0; j < n; j++) l[i * n + j] = a[i * n + j]! * scale[i]! * scale[j]!;
	if (choleskyInPlace(l, n) >= 0) return null;
	const inverse = inverseFromFactor(l, n);
	for (let i = 0; i < n; i++)
		for (let j = 0; j < n; j++) inverse[i * n + j]! *= scale[i]! * scale[j]!;
	return { inverse, logDeterminant: logScale + logDeterminantOf(l, n) };
}

/** AB for A (n × k) and B (k × m). */
export function product(
	a: Float64Array,
	b: Float64Array,
	n: number,
	k: number,
	m: number
): Float64Array {
	const result = new Float64Array(n * m);
	for (let i = 0; i < n; i++)
		for (let h = 0; h < k; h++) {
			const f = a[i * k + h]!;
			if (f === 0) continue;
			for (let j = 0; j < m; j++) result[i * m + j]! += f * b[h * m + j]!;
		}
	return result;
}

/** A'B for A (n × k) and B (n × m): k × m. */
export function crossProduct(
	a: Float64Array,
	b: Float64Array,
	n: number,
	k: number,
	m: number
): Float64Array {
	const result = new Float64Array(k * m);
	for (let i = 0; i < n; i++)
		for (let h = 0; h < k; h++) {
			const f = a[i * k + h]!;
			if (f === 0) continue;
			for (let j = 0; j < m; j++) result[h * m + j]! += f * b[i * m + j]!;
		}
	return result;
}

/** The sum of products of like entries: tr(A'B). */
export function inner(a: Float64Array, b: Float64Array): number {
	let sum = 0;
	for (let i = 0; i < a.length; i++) sum += a[i]! * b[i]!;
	return sum;
}

/** Rows `from…to − 1` and columns `left…right − 1` of a matrix with `width` columns. */
export function block(
	a: Float64Array,
	width: number,
	from: number,
	to: number,
	left: number,
	right: number
): Float64Array {
	const result = new Float64Array((to - from) * (right - left));
	let at = 0;
	for (let i = from; i < to; i++)
		for (let j = left; j < right; j++) result[at++] = a[i * width + j]!;
	return result;
}
