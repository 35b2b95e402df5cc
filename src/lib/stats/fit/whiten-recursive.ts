import { isSerial, type Layout } from '../dependence/layout.js';
import type { ModelDesign } from '../design/model-design.js';
import type { Rows } from './rows.js';
import type { Whitening } from './subject-loop.js';

/**
 * Independent, serial, and serial with noise, each with a standard deviation per class: linear in the rows.
 *
 * A row divided by its standard deviation is a process of variance 1 − π that keeps a factor φ of itself over each
 * gap, plus noise of variance π. One scalar prediction-error recursion takes it out of every column at once, for any
 * gaps, at π = 0 as at π = 1. Slopes: the same recursion differentiated; in the standard deviations through
 * R⁻¹[A Z] by the backward recursion.
 * Source: Kalman (1960), J. Basic Eng. 82:35-45; Jones (1993), Longitudinal Data with Serial Correlation, ch. 3 and 6;
 * Durbin & Koopman (2012), Time Series Analysis by State Space Methods, 4.5, for the backward recursion.
 */
export function recursiveWhitening(rows: Rows, layout: Layout, design: ModelDesign): Whitening {
	const { dependence, range: atRange, share: atShare, scale: atScale } = layout;
	const { errors } = dependence;
	const serial = isSerial(dependence);
	const w = rows.width + rows.q;
	const most = layout.mostPerSubject;
	const { order } = rows;
	const rowAt = (place: number) => (order ? order[place]! : place);
	const classOf = (subject: number, row: number) =>
		errors.varianceBy === 'visit'
			? design.visit[row]!
			: errors.varianceBy === 'group'
				? design.subjectGroup[subject]!
				: 0;
	const deviations = new Float64Array(layout.scaleClasses).fill(1);
	const scaleSlope = new Float64Array(layout.scaleClasses);
	let range = 1;
	let rho = 0;
	let share = 0;
	let shareSlopeFactor = 0;
	let slopeOfRange = 0;
	let slopeOfShare = 0;
	// φ from one row to the next, 1 − φ², and dφ/dx; of the subject at hand.
	const phi = new Float64Array(most + 1);
	const rest = new Float64Array(most + 1);
	const phiSlope = new Float64Array(most + 1);
	const mean = new Float64Array(w);
	const meanRange = new Float64Array(w);
	const meanShare = new Float64Array(w);
	const e = new Float64Array(w);
	const he = new Float64Array(w);
	const errorsKept = new Float64Array(atScale >= 0 ? most * w : 0);
	const fKept = new Float64Array(most);
	const kKept = new Float64Array(most);
	const back = new Float64Array(w);

	/** Sets `phi[i]` for the step into row i, and divides the rows by their standard deviations; Σ 2 log sd. */
	function enter(subject: number, columns: Float64Array, count: number): number {
		const from = rows.subjectStart[subject]!;
		let log = 0;
		for (let i = 0; i < count; i++) {
			if (serial && i > 0) {
				if (errors.along === 'visit') {
					const gap = design.visit[rowAt(from + i)]! - design.visit[rowAt(from + i - 1)]!;
					phi[i] = rho ** gap;
					rest[i] = 1 - phi[i]! ** 2;
					phiSlope[i] = gap * rho ** (gap - 1) * (1 - rho * rho);
				} else {
					const share = (design.time[from + i]! - design.time[from + i - 1]!) / range;
					phi[i] = Math.exp(-share);
					rest[i] = -Math.expm1(-2 * share);
					phiSlope[i] = phi[i]! * share;
				}
			}
			if (atScale >= 0) {
				const sd = deviations[classOf(subject, rowAt(from + i))]!;
				const by = 1 / sd;
				for (let j = 0; j < w; j++) columns[i * w + j]! *= by;
				log += 2 * Math.log(sd);
			}
		}
		phi[count] = 0;
		return log;
	}

	return {
		moves: serial || atScale >= 0,
		prepare(x) {
			scaleSlope.fill(0);
			slopeOfRange = slopeOfShare = 0;
			for (let k = 1; k < layout.scaleClasses; k++) deviations[k] = Math.exp(x[atScale + k - 1]!);
			if (!serial) {
				share = 1;
				return deviations.every((d) => d > 0 && Number.isFinite(d));
			}
			if (errors.along === 'visit') rho = Math.tanh(x[atRange]!);
			else range = layout.gapUnit * Math.exp(x[atRange]!);
			share = atShare >= 0 ? Math.sin(x[atShare]!) ** 2 : 0;
			shareSlopeFactor = atShare >= 0 ? Math.sin(2 * x[atShare]!) : 0;
			return (
				range > 0 && Number.isFinite(range) && deviations.every((d) => d > 0 && Number.isFinite(d))
			);
		},
		whiten(subject, columns, count, m) {
			let log = enter(subject, columns, count);
			if (!serial) {
				for (let i = 0; i < count; i++) {
					const at = i * w;
					for (let j = 0; j < w; j++) {
						const v = columns[at + j]!;
						if (v !== 0) for (let k = 0; k <= j; k++) m[j * w + k]! += v * columns[at + k]!;
					}
				}
				return log;
			}
			const own = 1 - share;
			let p = own;
			mean.fill(0);
			for (let i = 0; i < count; i++) {
				const at = i * w;
				if (i > 0) {
					const f2 = phi[i]! * phi[i]!;
					p = f2 * p + own * rest[i]!;
				}
				const f = p + share;
				if (!(f > 1e-14)) return NaN;
				const gain = p / f;
				const next = i + 1 < count ? phi[i + 1]! : 0;
				const by = 1 / f;
				for (let j = 0; j < w; j++) {
					const ej = columns[at + j]! - mean[j]!;
					e[j] = ej;
					mean[j] = next * (mean[j]! + gain * ej);
				}
				for (let j = 0; j < w; j++) {
					const v = e[j]! * by;
					const to = j * w;
					for (let k = 0; k <= j; k++) m[to + k]! += v * e[k]!;
				}
				log += Math.log(f);
				p = (p * share) / f;
			}
			return log;
		},
		pull(subject, columns, count, h) {
			enter(subject, columns, count);
			const from = rows.subjectStart[subject]!;
			if (!serial) {
				for (let i = 0; i < count; i++) {
					let form = 0;
					for (let j = 0; j < w; j++) {
						let sum = 0;
						for (let k = 0; k < w; k++) sum += h[j * w + k]! * columns[i * w + k]!;
						form += sum * columns[i * w + j]!;
					}
					scaleSlope[classOf(subject, rowAt(from + i))]! += 2 - 2 * form;
				}
				return;
			}
			const own = 1 - share;
			const noisy = atShare >= 0;
			let p = own;
			let pr = 0;
			let ps = -1;
			mean.fill(0);
			meanRange.fill(0);
			meanShare.fill(0);
			for (let i = 0; i < count; i++) {
				const at = i * w;
				if (i > 0) {
					// p, pr, ps hold the filtered variance and its slopes here.
					const f1 = phi[i]!;
					pr = 2 * f1 * phiSlope[i]! * (p - own) + f1 * f1 * pr;
					ps = f1 * f1 * ps - rest[i]!;
					p = f1 * f1 * p + own * rest[i]!;
				}
				const f = p + share;
				const by = 1 / f;
				const gain = p * by;
				const fr = pr;
				const fs = ps + 1;
				const gainRange = (pr - gain * fr) * by;
				const gainShare = (ps - gain * fs) * by;
				const next = i + 1 < count ? phi[i + 1]! : 0;
				const nextSlope = i + 1 < count ? phiSlope[i + 1]! : 0;
				for (let j = 0; j < w; j++) e[j] = columns[at + j]! - mean[j]!;
				let form = 0;
				let formRange = 0;
				let formShare = 0;
				for (let j = 0; j < w; j++) {
					let sum = 0;
					const to = j * w;
					for (let k = 0; k < w; k++) sum += h[to + k]! * e[k]!;
					form += sum * e[j]!;
					formRange -= sum * meanRange[j]!;
					formShare -= sum * meanShare[j]!;
				}
				slopeOfRange += fr * by + 2 * formRange * by - form * fr * by * by;
				if (noisy) slopeOfShare += fs * by + 2 * formShare * by - form * fs * by * by;
				for (let j = 0; j < w; j++) {
					const filtered = mean[j]! + gain * e[j]!;
					meanRange[j] =
						nextSlope * filtered + next * ((1 - gain) * meanRange[j]! + gainRange * e[j]!);
					if (noisy) meanShare[j] = next * ((1 - gain) * meanShare[j]! + gainShare * e[j]!);
					mean[j] = next * filtered;
				}
				if (atScale >= 0) {
					errorsKept.set(e, at);
					fKept[i] = f;
					kKept[i] = gain;
				}
				const left = share * by;
				ps = (ps * share + p) * by - p * left * fs * by;
				pr = pr * left * left;
				p *= left;
			}
			if (atScale < 0) return;
			back.fill(0);
			for (let i = count - 1; i >= 0; i--) {
				const at = i * w;
				const next = i + 1 < count ? phi[i + 1]! : 0;
				for (let j = 0; j < w; j++) {
					const u = errorsKept[at + j]! / fKept[i]! - kKept[i]! * next * back[j]!;
					he[j] = u;
					back[j] = u + next * back[j]!;
				}
				let form = 0;
				for (let j = 0; j < w; j++) {
					let sum = 0;
					for (let k = 0; k < w; k++) sum += h[j * w + k]! * he[k]!;
					form += sum * columns[at + j]!;
				}
				scaleSlope[classOf(subject, rowAt(from + i))]! += 2 - 2 * form;
			}
		},
		finish(slope) {
			if (serial) slope[atRange]! += slopeOfRange;
			if (atShare >= 0) slope[atShare]! += slopeOfShare * shareSlopeFactor;
			for (let k = 1; k < layout.scaleClasses; k++) slope[atScale + k - 1]! += scaleSlope[k]!;
			scaleSlope.fill(0);
			slopeOfRange = slopeOfShare = 0;
		}
	};
}
