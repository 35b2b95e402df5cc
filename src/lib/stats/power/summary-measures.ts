import { StatsError } from '../errors.js';
import type { AnalyseTrial, TrialEstimate } from './simulate.js';
import type { TrialData } from './trial.js';
import type { Question } from './types.js';

/**
 * The analysis by summary measures: one number of each subject, arms compared by the t-test for equal variances.
 *
 * The number is the subject's least-squares slope, the outcome at the visit asked about, or the mean after
 * treatment (its change from the mean before, or adjusted for it by regression). With complete balanced data and a
 * random level and slope it is the mixed model's own answer for slopes; it needs no iteration, which makes it a check
 * on everything around it.
 * Source: Matthews, Altman, Campbell & Royston (1990), BMJ 300:230-235.
 */
export function summaryMeasures(question: Question): AnalyseTrial {
	const measure =
		question.question === 'slope-difference'
			? slopeOf
			: question.question === 'difference-at-visit'
				? outcomeAt(question.time)
				: question.analysis === 'change'
					? changeOf
					: meanAfter;
	const adjusts = question.question === 'mean-difference' && question.analysis === 'ancova';
	return (data) => {
		const values: [number[], number[]] = [[], []];
		const before: [number[], number[]] = [[], []];
		forEachSubject(data, (from, to) => {
			const value = measure(data, from, to);
			if (value === null) return;
			const arm = data.arm[from] as 0 | 1;
			values[arm].push(value);
			if (adjusts) before[arm].push(meanWhere(data, from, to, (t) => t <= 0)!);
		});
		return adjusts ? adjusted(values, before) : compared(values);
	};
}

function forEachSubject(data: TrialData, visit: (from: number, to: number) => void): void {
	for (let from = 0; from < data.subject.length;) {
		let to = from;
		while (to < data.subject.length && data.subject[to] === data.subject[from]) to++;
		visit(from, to);
		from = to;
	}
}

type Measure = (data: TrialData, from: number, to: number) => number | null;

const slopeOf: Measure = ({ time, outcome }, from, to) => {
	const n = to - from;
	if (n < 2) return null;
	let [meanTime, mean] = [0, 0];
	for (let i = from; i < to; i++) {
		meanTime += time[i]! / n;
		mean += outcome[i]! / n;
	}
	let [xx, xy] = [0, 0];
	for (let i = from; i < to; i++) {
		xx += (time[i]! - meanTime) ** 2;
		xy += (time[i]! - meanTime) * (outcome[i]! - mean);
	}
	return xy / xx;
};

const outcomeAt =
	(at: number): Measure =>
	({ time, outcome }, from, to) => {
		for (let i = from; i < to; i++) if (time[i] === at) return outcome[i]!;
		return null;
	};

function meanWhere(
	{ time, outcome }: TrialData,
	from: number,
	to: number,
	counts: (t: number) => boolean
): number | null {
	let [sum, n] = [0, 0];
	for (let i = from; i < to; i++)
		if (counts(time[i]!)) {
			sum += outcome[i]!;
			n++;
		}
	return n > 0 ? sum / n : null;
}

const meanAfter: Measure = (data, from, to) => meanWhere(data, from, to, (t) => t > 0);
const changeOf: Measure = (data, from, to) =>
	meanAfter(data, from, to)! - meanWhere(data, from, to, (t) => t <= 0)!;

const mean = (values: readonly number[]) => values.reduce((a, b) => a + b, 0) / values.length;

function tooFew(): never {
	throw new StatsError('too-few-subjects', 'Each arm needs at least two subjects with a value.');
}

function compared([reference, treated]: readonly [number[], number[]]): TrialEstimate {
	if (reference.length < 2 || treated.length < 2) tooFew();
	const [m0, m1] = [mean(reference), mean(treated)];
	const squares =
		reference.reduce((s, v) => s + (v - m0) ** 2, 0) +
		treated.reduce((s, v) => s + (v - m1) ** 2, 0);
	const df = reference.length + treated.length - 2;
	const se = Math.sqrt((squares / df) * (1 / reference.length + 1 / treated.length));
	return { estimate: m1 - m0, se, df };
}

/** Arms compared with a common regression on the value before. */
function adjusted(values: [number[], number[]], before: [number[], number[]]): TrialEstimate {
	const n = values[0].length + values[1].length;
	if (values[0].length < 2 || values[1].length < 2 || n < 4) tooFew();
	let [xx, xy, yy] = [0, 0, 0];
	const x = before.map(mean);
	const y = values.map(mean);
	for (const arm of [0, 1] as const)
		values[arm].forEach((v, i) => {
			const [dx, dy] = [before[arm][i]! - x[arm]!, v - y[arm]!];
			xx += dx * dx;
			xy += dx * dy;
			yy += dy * dy;
		});
	const slope = xy / xx;
	const df = n - 3;
	const apart = x[1]! - x[0]!;
	const variance =
		((yy - slope * xy) / df) * (1 / values[0].length + 1 / values[1].length + apart ** 2 / xx);
	return { estimate: y[1]! - y[0]! - slope * apart, se: Math.sqrt(variance), df };
}
