import type { Layout } from '../dependence/layout.js';
import {
	commonCorrelation,
	lagCorrelations,
	shapeCorrelation,
	unstructuredFactor
} from '../dependence/shape.js';
import type { ModelDesign } from '../design/model-design.js';
import {
	choleskyInPlace,
	inverseFromFactor,
	logDeterminantOf,
	solveLower,
	solveUpper
} from '../numeric/dense.js';
import type { Rows } from './rows.js';
import type { Whitening } from './subject-loop.js';

/** Subjects seen at the same positions in a class of variance have the same leftover covariance. */
interface Pattern {
	positions: Int32Array;
	group: number;
	factor: Float64Array;
	logDeterminant: number;
	/** Subjects pulled since the last `prepare`, and Σ R⁻¹A h A'R⁻¹ of them. */
	pulled: number;
	gathered: Float64Array;
}

/**
 * Compound symmetry, Toeplitz and unstructured errors: one Cholesky for each missing-data pattern.
 *
 * The slope in R, Σ (R⁻¹ − R⁻¹AhA'R⁻¹), is gathered over positions and turned into that of the parameters once.
 * Source: Jennrich & Schluchter (1986), Biometrics 42:805-820.
 */
export function matrixWhitening(rows: Rows, layout: Layout, design: ModelDesign): Whitening {
	const { errors } = layout.dependence;
	const k = layout.positions;
	const w = rows.width + rows.q;
	const byGroup = errors.varianceBy === 'group' && layout.scaleClasses > 1;
	const copies = byGroup ? layout.scaleClasses : 1;
	const patterns: Pattern[] = [];
	const known = new Map<string, number>();
	const subjects = rows.subjectStart.length - 1;
	const patternOf = new Int32Array(subjects);
	for (let s = 0; s < subjects; s++) {
		const from = rows.subjectStart[s]!;
		const size = rows.subjectStart[s + 1]! - from;
		const positions = Int32Array.from({ length: size }, (_, i) =>
			layout.positionsAreVisits ? design.visit[from + i]! : i
		);
		const group = byGroup ? design.subjectGroup[s]! : 0;
		const key = `${group}:${positions.join()}`;
		let found = known.get(key);
		if (found === undefined) {
			found = patterns.length;
			known.set(key, found);
			patterns.push({
				positions,
				group,
				factor: new Float64Array(size * size),
				logDeterminant: 0,
				pulled: 0,
				gathered: new Float64Array(size * size)
			});
		}
		patternOf[s] = found;
	}
	const covariance = new Float64Array(copies * k * k);
	const deviations = new Float64Array(layout.scaleClasses).fill(1);
	let last = new Float64Array(0);
	const work = new Float64Array(layout.mostPerSubject * w);

	const deviation = (copy: number, position: number) =>
		errors.varianceBy === 'visit' && layout.scaleClasses > 1
			? deviations[position]!
			: byGroup
				? deviations[copy]!
				: 1;

	return {
		moves: true,
		prepare(x) {
			last = x.slice();
			for (let c = 1; c < layout.scaleClasses; c++)
				deviations[c] = Math.exp(x[layout.scale + c - 1]!);
			if (errors.structure === 'unstructured') {
				const l = unstructuredFactor(layout, x);
				for (let i = 0; i < k; i++)
					for (let j = 0; j <= i; j++) {
						let sum = 0;
						for (let h = 0; h <= j; h++) sum += l[i * k + h]! * l[j * k + h]!;
						covariance[i * k + j] = covariance[j * k + i] = sum;
					}
			} else {
				const r = shapeCorrelation(layout, x);
				for (let c = 0; c < copies; c++)
					for (let i = 0; i < k; i++)
						for (let j = 0; j < k; j++)
							covariance[(c * k + i) * k + j] = deviation(c, i) * deviation(c, j) * r[i * k + j]!;
			}
			for (const p of patterns) {
				const n = p.positions.length;
				for (let i = 0; i < n; i++)
					for (let j = 0; j < n; j++)
						p.factor[i * n + j] =
							covariance[(p.group * k + p.positions[i]!) * k + p.positions[j]!]!;
				if (choleskyInPlace(p.factor, n) >= 0) return false;
				p.logDeterminant = logDeterminantOf(p.factor, n);
				p.pulled = 0;
				p.gathered.fill(0);
			}
			return true;
		},
		whiten(subject, columns, count, m) {
			const p = patterns[patternOf[subject]!]!;
			solveLower(p.factor, count, columns, w);
			for (let i = 0; i < count; i++) {
				const at = i * w;
				for (let j = 0; j < w; j++) {
					const v = columns[at + j]!;
					if (v !== 0) for (let h = 0; h <= j; h++) m[j * w + h]! += v * columns[at + h]!;
				}
			}
			return p.logDeterminant;
		},
		pull(subject, columns, count, h) {
			const p = patterns[patternOf[subject]!]!;
			solveLower(p.factor, count, columns, w);
			solveUpper(p.factor, count, columns, w);
			p.pulled++;
			for (let i = 0; i < count; i++) {
				for (let j = 0; j < w; j++) {
					let sum = 0;
					for (let e = 0; e < w; e++) sum += h[j * w + e]! * columns[i * w + e]!;
					work[j] = sum;
				}
				for (let b = 0; b <= i; b++) {
					let sum = 0;
					for (let e = 0; e < w; e++) sum += work[e]! * columns[b * w + e]!;
					p.gathered[i * count + b]! += sum;
				}
			}
		},
		finish(slope) {
			const n = new Float64Array(copies * k * k);
			for (const p of patterns) {
				const size = p.positions.length;
				const inverse = inverseFromFactor(p.factor, size);
				for (let i = 0; i < size; i++)
					for (let j = 0; j <= i; j++) {
						const v = p.pulled * inverse[i * size + j]! - p.gathered[i * size + j]!;
						const [a, b] = [p.positions[i]!, p.positions[j]!];
						n[(p.group * k + a) * k + b]! += v;
						if (i !== j) n[(p.group * k + b) * k + a]! += v;
					}
				p.pulled = 0;
				p.gathered.fill(0);
			}
			if (errors.structure === 'unstructured') {
				const l = unstructuredFactor(layout, last);
				let at = layout.shape;
				for (let i = 1; i < k; i++)
					for (let j = 0; j <= i; j++) {
						let sum = 0;
						for (let a = 0; a < k; a++) sum += (n[i * k + a]! + n[a * k + i]!) * l[a * k + j]!;
						slope[at++]! += sum;
					}
				return;
			}
			// In log deviations: each entry moves with both of its positions.
			const shape = new Float64Array(k);
			let off = 0;
			for (let c = 0; c < copies; c++)
				for (let i = 0; i < k; i++)
					for (let j = 0; j < k; j++) {
						const at = (c * k + i) * k + j;
						const v = n[at]!;
						if (layout.scaleClasses > 1) {
							const first = byGroup ? c : i;
							const second = byGroup ? c : j;
							if (first > 0) slope[layout.scale + first - 1]! += v * covariance[at]!;
							if (second > 0) slope[layout.scale + second - 1]! += v * covariance[at]!;
						}
						const sd = deviation(c, i) * deviation(c, j);
						shape[Math.abs(i - j)]! += v * sd;
						if (i !== j) off += v * sd;
					}
			if (errors.structure === 'compound-symmetry') {
				slope[layout.shape]! += off * commonCorrelation(layout, last).slope;
				return;
			}
			const partial = Array.from({ length: k - 1 }, (_, i) => Math.tanh(last[layout.shape + i]!));
			const { slope: jacobian } = lagCorrelations(partial);
			for (let d = 0; d < k - 1; d++) {
				let sum = 0;
				for (let lag = 1; lag < k; lag++) sum += shape[lag]! * jacobian[lag * (k - 1) + d]!;
				slope[layout.shape + d]! += sum * (1 - partial[d]! ** 2);
			}
		}
	};
}
