import type { ModelDesign } from '../design/model-design.js';
import { isSerial, type Layout } from './layout.js';
import type { Derivatives, Occasions } from './occasions.js';
import { commonCorrelation, lagCorrelations, unstructuredFactor } from './shape.js';

/** Correlations of the leftover errors and their derivatives in the parameters of the correlation. */
interface Correlation {
	names: string[];
	values: number[];
	at(o: Occasions): {
		r: Float64Array;
		first: Float64Array[];
		second: { k: number; l: number; matrix: Float64Array }[];
	};
}

const power = (base: number, exponent: number) => (exponent === 0 ? 1 : base ** exponent);

function serialCorrelation(layout: Layout, x: Float64Array): Correlation {
	const alongVisits = layout.dependence.errors.along === 'visit';
	const rho = Math.tanh(x[layout.range]!);
	const range = layout.gapUnit * Math.exp(x[layout.range]!);
	const noisy = layout.share >= 0;
	const share = noisy ? Math.sin(x[layout.share]!) ** 2 : 0;
	const value = alongVisits ? rho : Math.exp(-1 / range);
	// φ^e, by the range where φ itself would lose digits.
	const of = (e: number) => (alongVisits ? power(rho, e) : Math.exp(-e / range));
	return {
		names: noisy ? [alongVisits ? 'rho' : 'range', 'noise share'] : [alongVisits ? 'rho' : 'range'],
		values: noisy ? [value, share] : [value],
		at(o) {
			const n = o.time.length;
			const make = () => new Float64Array(n * n);
			const [r, d1, d2, dShare, dBoth] = [make(), make(), make(), make(), make()];
			for (let i = 0; i < n; i++)
				for (let j = 0; j < n; j++) {
					const at = i * n + j;
					if (i === j) {
						r[at] = 1;
						continue;
					}
					const gap = alongVisits
						? Math.abs(o.visit[i]! - o.visit[j]!)
						: Math.abs(o.time[i]! - o.time[j]!);
					const whole = of(gap);
					const slope = gap === 0 ? 0 : gap * of(gap - 1);
					r[at] = (1 - share) * whole;
					d1[at] = (1 - share) * slope;
					d2[at] = gap === 0 || gap === 1 ? 0 : (1 - share) * gap * (gap - 1) * of(gap - 2);
					dShare[at] = -whole;
					dBoth[at] = -slope;
				}
			const second = [{ k: 0, l: 0, matrix: d2 }];
			if (noisy) second.push({ k: 0, l: 1, matrix: dBoth });
			return { r, first: noisy ? [d1, dShare] : [d1], second };
		}
	};
}

function shapeCorrelationOf(layout: Layout, x: Float64Array): Correlation {
	const toeplitz = layout.dependence.errors.structure === 'toeplitz';
	const k = layout.positions;
	const values = toeplitz
		? [
				...lagCorrelations(Array.from({ length: k - 1 }, (_, i) => Math.tanh(x[layout.shape + i]!)))
					.correlation
			].slice(1)
		: [commonCorrelation(layout, x).rho];
	return {
		names: toeplitz ? values.map((_, i) => `correlation[lag ${i + 1}]`) : ['rho'],
		values,
		at(o) {
			const n = o.time.length;
			const r = new Float64Array(n * n);
			const first = values.map(() => new Float64Array(n * n));
			for (let i = 0; i < n; i++)
				for (let j = 0; j < n; j++) {
					const lag = Math.abs(o.position[i]! - o.position[j]!);
					if (i === j) r[i * n + j] = 1;
					else {
						const which = toeplitz ? lag - 1 : 0;
						r[i * n + j] = values[which]!;
						first[which]![i * n + j] = 1;
					}
				}
			return { r, first, second: [] };
		}
	};
}

const none: Correlation = {
	names: [],
	values: [],
	at(o) {
		const n = o.time.length;
		const r = new Float64Array(n * n);
		for (let i = 0; i < n; i++) r[i * n + i] = 1;
		return { r, first: [], second: [] };
	}
};

/** What names of parameters are made of. */
export type Labels = Pick<ModelDesign, 'visits' | 'groups'>;

/** The leftover part: its parameters (values ÷ σ²) and derivatives. */
export interface Leftover {
	names: string[];
	units: ('square' | 'none')[];
	values: number[];
	at(o: Occasions): Derivatives;
}

/** A variance for each visit and a covariance for each pair. */
function unstructuredLeftover(layout: Layout, design: Labels, x: Float64Array): Leftover {
	const k = layout.positions;
	const l = unstructuredFactor(layout, x);
	const names: string[] = [];
	const values: number[] = [];
	const index = new Int32Array(k * k);
	for (let j = 0; j < k; j++)
		for (let i = 0; i <= j; i++) {
			index[i * k + j] = index[j * k + i] = names.length;
			const [a, b] = [design.visits[i]!, design.visits[j]!];
			names.push(i === j ? `variance[visit ${a}]` : `covariance[visit ${a}, visit ${b}]`);
			let sum = 0;
			for (let h = 0; h <= i; h++) sum += l[i * k + h]! * l[j * k + h]!;
			values.push(sum);
		}
	return {
		names,
		units: names.map(() => 'square'),
		values,
		at(o) {
			const n = o.time.length;
			const v = new Float64Array(n * n);
			const first = names.map(() => new Float64Array(0));
			for (let i = 0; i < n; i++)
				for (let j = 0; j < n; j++) {
					const which = index[o.position[i]! * k + o.position[j]!]!;
					if (first[which]!.length === 0) first[which] = new Float64Array(n * n);
					first[which]![i * n + j] = 1;
					v[i * n + j] = values[which]!;
				}
			return { v, first, second: [] };
		}
	};
}

/** D R D with a variance for each class, or R scaled by one variance. */
function scaledLeftover(
	layout: Layout,
	names: string[],
	x: Float64Array,
	correlation: Correlation
): Leftover {
	const classes = layout.scaleClasses;
	const variances = names.map((_, k) => (k === 0 ? 1 : Math.exp(2 * x[layout.scale + k - 1]!)));
	const by = layout.dependence.errors.varianceBy;
	const classOf = (o: Occasions, i: number) =>
		classes === 1 ? 0 : by === 'visit' ? o.visit[i]! : o.group;
	return {
		names: [...names, ...correlation.names],
		units: [...names.map(() => 'square' as const), ...correlation.names.map(() => 'none' as const)],
		values: [...variances, ...correlation.values],
		at(o) {
			const n = o.time.length;
			const { r, first: slopes, second: bends } = correlation.at(o);
			const scaled = (m: Float64Array, weight: (a: number, b: number) => number = () => 1) => {
				const out = new Float64Array(n * n);
				for (let i = 0; i < n; i++)
					for (let j = 0; j < n; j++) {
						const [a, b] = [classOf(o, i), classOf(o, j)];
						const f = m[i * n + j]!;
						if (f !== 0)
							out[i * n + j] = f * Math.sqrt(variances[a]! * variances[b]!) * weight(a, b);
					}
				return out;
			};
			const present = new Set(Array.from({ length: n }, (_, i) => classOf(o, i)));
			const count = (k: number, a: number, b: number) => (a === k ? 1 : 0) + (b === k ? 1 : 0);
			const empty = new Float64Array(0);
			const first = variances.map((v, k) =>
				present.has(k) ? scaled(r, (a, b) => count(k, a, b) / (2 * v)) : empty
			);
			for (const slope of slopes) first.push(scaled(slope));
			const second: Derivatives['second'] = [];
			if (classes > 1)
				for (const k of present)
					for (const l of present) {
						if (l < k) continue;
						const [vk, vl] = [variances[k]!, variances[l]!];
						const matrix = scaled(r, (a, b) => {
							if (k !== l)
								return count(k, a, b) === 1 && count(l, a, b) === 1 ? 1 / (4 * vk * vl) : 0;
							const m = count(k, a, b);
							return (m * (m - 2)) / (4 * vk * vk);
						});
						second.push({ k, l, matrix });
					}
			slopes.forEach((slope, h) => {
				for (const k of present)
					second.push({
						k,
						l: classes + h,
						matrix: scaled(slope, (a, b) => count(k, a, b) / (2 * variances[k]!))
					});
			});
			for (const { k, l, matrix } of bends)
				second.push({ k: classes + k, l: classes + l, matrix: scaled(matrix) });
			return { v: scaled(r), first, second };
		}
	};
}

/** Serial with noise or compound symmetry under one variance: two components rather than a share of one. */
function componentsLeftover(layout: Layout, x: Float64Array): Leftover {
	if (layout.dependence.errors.structure === 'compound-symmetry') {
		const { rho } = commonCorrelation(layout, x);
		return {
			names: ['covariance', 'residual'],
			units: ['square', 'square'],
			values: [rho, 1 - rho],
			at(o) {
				const n = o.time.length;
				const j = new Float64Array(n * n).fill(1);
				const i = none.at(o).r;
				return { v: j.map((_, h) => rho + (1 - rho) * i[h]!), first: [j, i], second: [] };
			}
		};
	}
	const share = Math.sin(x[layout.share]!) ** 2;
	const bare: Layout = { ...layout, share: -1 };
	const correlation = serialCorrelation(bare, x);
	return {
		names: ['serial', correlation.names[0]!, 'noise'],
		units: ['square', 'none', 'square'],
		values: [1 - share, correlation.values[0]!, share],
		at(o) {
			const { r, first, second } = correlation.at(o);
			const i = none.at(o).r;
			const part = (m: Float64Array) => m.map((f) => (1 - share) * f);
			return {
				v: r.map((f, h) => (1 - share) * f + share * i[h]!),
				first: [r, part(first[0]!), i],
				second: [
					{ k: 0, l: 1, matrix: first[0]! },
					{ k: 1, l: 1, matrix: part(second[0]!.matrix) }
				]
			};
		}
	};
}

/** The leftover errors of a model at working parameters `x`, in natural parameters ÷ σ². */
export function leftoverOf(layout: Layout, design: Labels, x: Float64Array): Leftover {
	const { structure, varianceBy } = layout.dependence.errors;
	if (structure === 'unstructured') return unstructuredLeftover(layout, design, x);
	const one = layout.scaleClasses === 1;
	if (one && (structure === 'compound-symmetry' || structure === 'serial-with-noise'))
		return componentsLeftover(layout, x);
	const single =
		structure === 'serial' ? 'serial' : structure === 'toeplitz' ? 'variance' : 'residual';
	const labels = varianceBy === 'visit' ? design.visits : design.groups;
	const names = one ? [single] : labels.map((label) => `variance[${varianceBy} ${label}]`);
	const correlation =
		structure === 'independent'
			? none
			: isSerial(layout.dependence)
				? serialCorrelation(layout, x)
				: shapeCorrelationOf(layout, x);
	return scaledLeftover(layout, names, x, correlation);
}
