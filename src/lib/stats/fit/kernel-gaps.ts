import type { Layout } from '../dependence/layout.js';
import type { ModelDesign } from '../design/model-design.js';
import type { Kernel } from './kernel.js';
import type { Rows } from './rows.js';

/** More different gaps than this and the rows are passed at every evaluation instead. */
const MOST_GAPS = 100;

/** Sums over the neighbouring rows that lie a gap apart, lower halves of c × c: of a a', a b' + b a' and b b'. */
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
	const { n, c, a, subjectStart } = rows;
	const byVisit = layout.dependence.errors.along === 'visit';
	const known = new Map<number, GapSums>();
	const first = new Float64Array(c * c);
	let last: GapSums | undefined;
	if (n === 0) return null;
	for (let s = 0; s + 1 < subjectStart.length; s++) {
		const from = subjectStart[s]!;
		for (let i = from; i < subjectStart[s + 1]!; i++) {
			const at = i * c;
			if (i === from) {
				for (let j = 0; j < c; j++)
					for (let k = 0; k <= j; k++) first[j * c + k]! += a[at + j]! * a[at + k]!;
				continue;
			}
			const gap = byVisit
				? design.visit[i]! - design.visit[i - 1]!
				: design.time[i]! - design.time[i - 1]!;
			if (!last || last.gap !== gap) {
				last = known.get(gap);
				if (!last) {
					if (known.size >= MOST_GAPS) return null;
					const make = () => new Float64Array(c * c);
					last = { gap, count: 0, now: make(), both: make(), before: make() };
					known.set(gap, last);
				}
			}
			last.count++;
			const { now, both, before } = last;
			const back = at - c;
			for (let j = 0; j < c; j++) {
				const u = a[at + j]!;
				const v = a[back + j]!;
				const to = j * c;
				for (let k = 0; k <= j; k++) {
					now[to + k]! += u * a[at + k]!;
					both[to + k]! += u * a[back + k]! + v * a[at + k]!;
					before[to + k]! += v * a[back + k]!;
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
			for (let j = 0; j < c; j++) for (let k = 0; k < j; k++) m[k * c + j] = m[j * c + k]!;
			return { m, logDeterminant: log };
		},
		backward(x, h, slope) {
			let total = 0;
			for (const { gap, count, now, both, before } of gaps) {
				const { phi, rest, slope: dphi } = stepAt(x, gap);
				let sum = (-2 * phi * count) / rest;
				for (let j = 0; j < c; j++)
					for (let k = 0; k <= j; k++) {
						const i = j * c + k;
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
