import { subjectCovariance, type Layout } from './layout.js';
import { leftoverOf, type Labels } from './leftover.js';
import type { Derivatives, Occasions } from './occasions.js';

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
