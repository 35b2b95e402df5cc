import type { Layout } from '../dependence/layout.js';
import type { ModelDesign } from '../design/model-design.js';
import type { Kernel } from './kernel.js';
import type { Rows } from './rows.js';

/** More different gaps than this and the rows are passed at every evaluation instead. */
const MOST_GAPS = 100;

/** Sums over the neighbouring rows that lie a gap apart, lower halves of w × w, w the width of [Q r U]: of a a', a b' + b a' and b b'. */
interface GapSums {
	gap: number;
	count: number;
	now: Float64Array;
	both: Float64Array;
	before: Float64Array;
}

/**
 * Serial errors alone, of one variance, when gaps repeat: one pass, and then a cost by the number of different gaps.
 *
 * R⁻¹ has three bands: A'R⁻¹A = a₁a₁' + Σ (a − φb)(a − φb)' / (1 − φ²) over neighbours b, a. Null when the gaps are
 * too many. Source: Jones & Boadi-Boateng (1991), Biometrics 47:161-175, for unequal gaps.
 */
export function gapKernel(rows: Rows, layout: Layout, design: ModelDesign): Kernel | null {
	const { n, c, a, visits, visit, width, subjectStart } = rows;
	const byVisit = layout.dependence.errors.along === 'visit';
	const known = new Map<number, GapSums>();
	const first = new Float64Array(width * width);
	let last: GapSums | undefined;
	if (n === 0 || rows.order) return null;
	let here = new Float64Array(width);
	let back = new Float64Array(width);
	for (let s = 0; s + 1 < subjectStart.length; s++) {
		const from = subjectStart[s]!;
		for (let i = from; i < subjectStart[s + 1]!; i++) {
			[here, back] = [back, here];
			const at = i * c;
			for (let j = 0; j < c; j++) here[j] = a[at + j]!;
			if (visits > 0) {
				here.fill(0, c);
				here[c + visit[i]!] = 1;
			}
			if (i === from) {
				for (let j = 0; j < width; j++) {
					const u = here[j]!;
					if (u !== 0) for (let k = 0; k <= j; k++) first[j * width + k]! += u * here[k]!;
				}
				continue;
			}
			const gap = byVisit
				? design.visit[i]! - design.visit[i - 1]!
				: design.time[i]! - design.time[i - 1]!;
			if (!last || last.gap !== gap) {
				last = known.get(gap);
				if (!last) {
					if (known.size >= MOST_GAPS) return null;
					const make = () => new Float64Array(width * width);
					last = { gap, count: 0, now: make(), both: make(), before: make() };
					known.set(gap, last);
				}
			}
			last.count++;
			const { now, both, before } = last;
			for (let j = 0; j < width; j++) {
				const u = here[j]!;
				const v = back[j]!;
				if (u === 0 && v === 0) continue;
				const to = j * width;
				for (let k = 0; k <= j; k++) {
					now[to + k]! += u * here[k]!;
					both[to + k]! += u * back[k]! + v * here[k]!;
					before[to + k]! += v * back[k]!;
				}
			}
		}
	}
	const gaps = [...known.values()];
	const stepAt = (x: Float64Array, gap: number) => {
		if (byVisit) {
			const rho = Math.tanh(x[layout.range]!);
			const phi = rho ** gap;
			return { phi, rest: 1 - phi * phi, slope: gap * rho ** (gap - 1) * (1 - rho * rho) };
		}
		const share = gap / (layout.gapUnit * Math.exp(x[layout.range]!));
		const phi = Math.exp(-share);
		return { phi, rest: -Math.expm1(-2 * share), slope: phi * share };
	};
	return {
		forward(x) {
			const m = first.slice();
			let log = 0;
			for (const { gap, count, now, both, before } of gaps) {
				const { phi, rest } = stepAt(x, gap);
				if (!(rest > 1e-14)) return null;
				log += count * Math.log(rest);
				for (let i = 0; i < m.length; i++)
					m[i]! += (now[i]! - phi * both[i]! + phi * phi * before[i]!) / rest;
			}
			for (let j = 0; j < width; j++)
				for (let k = 0; k < j; k++) m[k * width + j] = m[j * width + k]!;
			return { m, logDeterminant: log };
		},
		backward(x, h, slope) {
			let total = 0;
			for (const { gap, count, now, both, before } of gaps) {
				const { phi, rest, slope: dphi } = stepAt(x, gap);
				let sum = (-2 * phi * count) / rest;
				for (let j = 0; j < width; j++)
					for (let k = 0; k <= j; k++) {
						const i = j * width + k;
						const form = now[i]! - phi * both[i]! + phi * phi * before[i]!;
						const change =
							(2 * phi * before[i]! - both[i]!) / rest + (2 * phi * form) / (rest * rest);
						sum += (j === k ? 1 : 2) * h[i]! * change;
					}
				total += sum * dphi;
			}
			slope[layout.range]! += total;
		}
	};
}
