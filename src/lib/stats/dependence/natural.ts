import type { ModelDesign } from '../design/model-design.js';
import { isSerial, subjectCovariance, type Layout } from './layout.js';
import { commonCorrelation, lagCorrelations, unstructuredFactor } from './shape.js';

/** A parameter of the covariance as people know it: a variance, a covariance, a correlation. */
export interface NaturalParameter {
	/** In our words: `subject level`, `serial`, `range`, `variance[visit 3]` …; φ = exp(−1/range) where it is `range`. */
	name: string;
	/** `square`: outcome unit squared (per time unit for slopes); `none`: unitless. */
	unit: 'square' | 'none';
	/** On the data's own scale; φ for `range`. */
	value: number;
	/** False when it stands at the edge of its space, or means nothing because another does. */
	active: boolean;
}

/** The rows of a subject as far as its covariance goes. */
export interface Occasions {
	time: Float64Array;
	/** Positions in the matrix over visits. */
	position: Int32Array;
	visit: Int32Array;
	group: number;
}

/** V* = V/σ² of a subject without shared visit effects, and its derivatives in the active parameters (÷ σ²). */
export interface Derivatives {
	v: Float64Array;
	first: Float64Array[];
	second: { k: number; l: number; matrix: Float64Array }[];
}

export interface NaturalModel {
	parameters: NaturalParameter[];
	/** Positions among `parameters` of those that are differentiated, the visit variance left out. */
	blocks: number[];
	/** Position of an active visit variance; −1 without one. */
	visit: number;
	/** Visit variance ÷ σ². */
	visitRatio: number;
	at(occasions: Occasions): Derivatives;
	covariance(occasions: Occasions): Float64Array;
}

/** What names of parameters are made of. */
type Labels = Pick<ModelDesign, 'visits' | 'groups'>;

export function occasionsOf(design: ModelDesign, layout: Layout, subject: number): Occasions {
	const from = design.subjectStart[subject]!;
	const to = design.subjectStart[subject + 1]!;
	const visit = design.visit.slice(from, to);
	return {
		time: design.time.slice(from, to),
		position: layout.positionsAreVisits ? visit : Int32Array.from(visit, (_, i) => i),
		visit,
		group: design.subjectGroup[subject]!
	};
}

/** Two subjects with the same key have the same covariance. */
export function patternKey(layout: Layout, o: Occasions): string {
	const { dependence: d } = layout;
	const parts = [String(o.time.length)];
	const slope = layout.q === 2 || d.subjectEffects === 'slope';
	if (slope || (isSerial(d) && d.errors.along === 'time')) parts.push(o.time.join());
	if (
		d.visitEffects ||
		d.errors.along === 'visit' ||
		d.errors.varianceBy === 'visit' ||
		layout.shape >= 0
	)
		parts.push(o.visit.join());
	if (d.errors.varianceBy === 'group') parts.push(String(o.group));
	return parts.join('|');
}

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

/** The leftover part: its parameters (values ÷ σ²) and derivatives. */
interface Leftover {
	names: string[];
	units: ('square' | 'none')[];
	values: number[];
	at(o: Occasions): Derivatives;
}

/** Sums of fixed matrices: independent rows, compound symmetry, unstructured, serial with noise as two variances. */
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

function leftoverOf(layout: Layout, design: Labels, x: Float64Array): Leftover {
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

/** Names no longer free when a component stands at its edge. */
const silenced: Record<string, string[]> = {
	'subject level': ['subject level', 'level–slope covariance'],
	'subject slope': ['subject slope', 'level–slope covariance'],
	visit: ['visit'],
	range: ['range', 'noise', 'noise share'],
	// A serial part that never fades is a level.
	'range without end': ['range', 'subject level'],
	noise: ['noise', 'noise share'],
	serial: ['serial', 'range', 'rho', 'noise share']
};

/**
 * The covariance in natural parameters at working parameters `x` and scale σ², with first and second derivatives.
 *
 * Subject effects are differentiated on the inner time, (time − origin) / unit; they enter V linearly, so that no
 * result depends on it. `edges`: names of components at their edge, whose parameters are not differentiated.
 */
export function naturalModel(
	design: Labels,
	layout: Layout,
	x: Float64Array,
	scale: number,
	edges: readonly string[]
): NaturalModel {
	const silent = new Set(edges.flatMap((e) => silenced[e] ?? []));
	const effects = layout.dependence.subjectEffects;
	const g = subjectCovariance(layout, x);
	const subject: NaturalParameter[] = [];
	const entries: [number, number][] = [];
	const add = (name: string, value: number, a: number, b: number) => {
		subject.push({ name, unit: 'square', value: value * scale, active: !silent.has(name) });
		entries.push([a, b]);
	};
	const { timeOrigin: t0, timeUnit: unit } = layout;
	if (effects === 'level') add('subject level', g[0]!, 0, 0);
	if (effects === 'slope') add('subject slope', g[0]! / unit ** 2, 0, 0);
	if (layout.q === 2) {
		const slope = g[3]! / unit ** 2;
		const covariance = g[1]! / unit - t0 * slope;
		add('subject level', g[0]! - (2 * t0 * g[1]!) / unit + t0 * t0 * slope, 0, 0);
		if (effects === 'level-and-slope') add('level–slope covariance', covariance, 0, 1);
		add('subject slope', slope, 1, 1);
	}
	const leftover = leftoverOf(layout, design, x);
	const visitRatio = layout.visit >= 0 ? x[layout.visit]! ** 2 : 0;
	const visit: NaturalParameter[] =
		layout.visit >= 0
			? [{ name: 'visit', unit: 'square', value: visitRatio * scale, active: !silent.has('visit') }]
			: [];
	const rest: NaturalParameter[] = leftover.names.map((name, k) => ({
		name,
		unit: leftover.units[k]!,
		value: leftover.values[k]! * (leftover.units[k] === 'square' ? scale : 1),
		active: !silent.has(name)
	}));
	const parameters = [...subject, ...visit, ...rest];
	const blocks = parameters.flatMap((p, k) => (p.active && p.name !== 'visit' ? [k] : []));
	const zOf = (o: Occasions): Float64Array[] => {
		const time = o.time.map((t) => (t - t0) / unit);
		const ones = new Float64Array(o.time.length).fill(1);
		return effects === 'slope'
			? [time]
			: layout.q === 2
				? [ones, time]
				: layout.q === 1
					? [ones]
					: [];
	};
	const offset = subject.length + visit.length;
	const withSubject = (o: Occasions, v: Float64Array) => {
		const n = o.time.length;
		const z = zOf(o);
		for (let a = 0; a < layout.q; a++)
			for (let b = 0; b < layout.q; b++) {
				const w = g[a * layout.q + b]!;
				if (w === 0) continue;
				for (let i = 0; i < n; i++)
					for (let j = 0; j < n; j++) v[i * n + j]! += w * z[a]![i]! * z[b]![j]!;
			}
		return v;
	};
	return {
		parameters,
		blocks,
		visit: visit[0]?.active ? subject.length : -1,
		visitRatio,
		covariance: (o) => withSubject(o, leftover.at(o).v.slice()),
		at(o) {
			const n = o.time.length;
			const z = zOf(o);
			const own = leftover.at(o);
			const first = blocks.map((k) => {
				if (k >= offset) return own.first[k - offset]!;
				const [a, b] = entries[k]!;
				const m = new Float64Array(n * n);
				for (let i = 0; i < n; i++)
					for (let j = 0; j < n; j++) {
						m[i * n + j]! += z[a]![i]! * z[b]![j]!;
						if (a !== b) m[i * n + j]! += z[b]![i]! * z[a]![j]!;
					}
				return m;
			});
			const place = new Map(blocks.map((k, at) => [k, at]));
			const second = own.second.flatMap(({ k, l, matrix }) => {
				const [a, b] = [place.get(k + offset), place.get(l + offset)];
				return a === undefined || b === undefined ? [] : [{ k: a, l: b, matrix }];
			});
			return { v: withSubject(o, own.v.slice()), first, second };
		}
	};
}
