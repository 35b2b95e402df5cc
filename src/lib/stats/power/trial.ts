import { covarianceFactor } from '../numeric/multivariate-normal.js';
import type { RandomStream } from '../numeric/random.js';
import type { Question } from './types.js';

/** The rows of one simulated trial; an outcome that was not seen has no row. Subjects in order of enrolment. */
export interface TrialData {
	/** Subjects enrolled, with or without rows. */
	subjects: number;
	/** Number of the subject of each row, from 0. */
	subject: Int32Array;
	/** 0 or 1. */
	arm: Uint8Array;
	/** Position of the visit in the design, from 0. */
	visit: Int32Array;
	time: Float64Array;
	outcome: Float64Array;
}

interface Layout {
	times: number[];
	/** Of level and slope, 2 × 2 lower triangle, row-major. */
	factor: Float64Array;
	residualDeviation: number;
	dropout: readonly [readonly number[], readonly number[]];
	/** What arm 1 adds at a visit for a difference of 1. */
	pattern: number[];
}

/** Visits of a mean difference: before treatment at 1 − p to 0, then at 1 to n. */
export function layoutOf(question: Question): Layout {
	if (question.question === 'mean-difference') {
		const before = question.analysis === 'follow-up' ? 0 : question.baselineVisits;
		const times = Array.from({ length: before + question.visits }, (_, j) => j + 1 - before);
		const level = question.icc * question.totalVariance;
		const stays = times.map(() => 0);
		return {
			times,
			factor: covarianceFactor([
				[level, 0],
				[0, 0]
			]),
			residualDeviation: Math.sqrt(question.totalVariance - level),
			dropout: [stays, stays],
			pattern: times.map((t) => (t > 0 ? 1 : 0))
		};
	}
	const { times, variances: v, dropout } = question;
	const first = question.commonBaseline ? times[0] : undefined;
	return {
		times: [...times],
		factor: covarianceFactor([
			[v.level, v.levelSlopeCovariance],
			[v.levelSlopeCovariance, v.slope]
		]),
		residualDeviation: Math.sqrt(v.residual),
		dropout,
		pattern:
			question.question === 'slope-difference'
				? [...times]
				: question.mean === 'linear' && question.time !== 0
					? times.map((t) => t / question.time)
					: times.map((t) => (t === first ? 0 : 1))
	};
}

/**
 * One trial of [arm 0, arm 1] subjects under a difference, drawn from a stream.
 *
 * Arms alternate in proportion, so that any first part of the trial is balanced as the whole. Every subject takes
 * the same number of draws, so that the same stream gives the same people whatever the difference and dropout. A
 * difference in slopes grows from time 0; one at a visit is proportional to time (straight line) or the same at
 * every visit (but the first, with a common baseline); one of means is the same at each visit after treatment.
 */
export function drawTrial(
	layout: Layout,
	subjects: readonly [number, number],
	difference: number,
	random: RandomStream
): TrialData {
	const { times, factor, residualDeviation, dropout, pattern } = layout;
	const total = subjects[0] + subjects[1];
	const most = total * times.length;
	const data: TrialData = {
		subjects: total,
		subject: new Int32Array(most),
		arm: new Uint8Array(most),
		visit: new Int32Array(most),
		time: new Float64Array(most),
		outcome: new Float64Array(most)
	};
	let rows = 0;
	for (let i = 0; i < total; i++) {
		const arm = Math.floor(((i + 1) * subjects[1]) / total) - Math.floor((i * subjects[1]) / total);
		const first = random.normal();
		const second = random.normal();
		const level = factor[0]! * first;
		const slope = factor[2]! * first + factor[3]! * second;
		const stays = random.uniform();
		for (let j = 0; j < times.length; j++) {
			const error = residualDeviation * random.normal();
			if (stays < dropout[arm as 0 | 1][j]!) continue;
			data.subject[rows] = i;
			data.arm[rows] = arm;
			data.visit[rows] = j;
			data.time[rows] = times[j]!;
			data.outcome[rows] = level + slope * times[j]! + arm * difference * pattern[j]! + error;
			rows++;
		}
	}
	return firstRows(data, rows, total);
}

function firstRows(data: TrialData, rows: number, subjects: number): TrialData {
	return {
		subjects,
		subject: data.subject.subarray(0, rows),
		arm: data.arm.subarray(0, rows),
		visit: data.visit.subarray(0, rows),
		time: data.time.subarray(0, rows),
		outcome: data.outcome.subarray(0, rows)
	};
}

/** What a look sees: all visits of the first `subjects` enrolled. */
export function firstSubjects(data: TrialData, subjects: number): TrialData {
	let rows = 0;
	while (rows < data.subject.length && data.subject[rows]! < subjects) rows++;
	return firstRows(data, rows, Math.min(subjects, data.subjects));
}
