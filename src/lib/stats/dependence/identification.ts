import type { ModelDesign } from '../design/model-design.js';
import { StatsError } from '../errors.js';
import type { PreparedModel } from '../fit/prepare-model.js';
import type { Dependence } from '../plan.js';
import { isMatrixStructure, isSerial } from './layout.js';

const structureName: Record<string, string> = {
	'compound-symmetry': 'compound-symmetric',
	toeplitz: 'Toeplitz',
	unstructured: 'unstructured'
};

const hasLevel = (d: Dependence) => d.subjectEffects !== 'none' && d.subjectEffects !== 'slope';
const hasSlope = (d: Dependence) => d.subjectEffects !== 'none' && d.subjectEffects !== 'level';

function refuse(sentence: string, facts: Record<string, string | number> = {}): never {
	throw new StatsError('not-identified', sentence, facts);
}

/** Combinations that no data can tell apart. */
export function refuseUnidentifiedDependence(d: Dependence): void {
	if (hasLevel(d) && isMatrixStructure(d)) {
		refuse(
			`A lasting level of each subject cannot be told from ${structureName[d.errors.structure]} errors, which already hold any covariance shared by all of a subject’s visits. Leave one of them out.`
		);
	}
	if (d.errors.structure === 'unstructured' && d.errors.varianceBy === 'group') {
		throw new StatsError(
			'bad-option',
			'Unstructured errors have a variance for each visit; a variance for each group besides is not offered.'
		);
	}
}

interface Counted {
	subjects: number;
	most: number;
	/** Subjects seen at least twice, and three times. */
	twice: number;
	sameTime: boolean;
	sameVisit: boolean;
	timesDiffer: boolean;
	/** Distinct times, at most a few. */
	distinctTimes: number;
}

function countsOf(design: ModelDesign): Counted {
	const { subjectStart: start, time, visit } = design;
	const counted: Counted = {
		subjects: start.length - 1,
		most: 0,
		twice: 0,
		sameTime: false,
		sameVisit: false,
		timesDiffer: false,
		distinctTimes: 0
	};
	const times = new Set<number>();
	// The subject that was last seen at each visit.
	const last = new Int32Array(Math.max(1, design.visits.length)).fill(-1);
	for (let s = 0; s < counted.subjects; s++) {
		const from = start[s]!;
		const to = start[s + 1]!;
		counted.most = Math.max(counted.most, to - from);
		if (to - from > 1) counted.twice++;
		for (let i = from; i < to; i++) {
			if (times.size < 10) times.add(time[i]!);
			if (i > from && time[i] === time[i - 1]) counted.sameTime = true;
			if (i > from && time[i] !== time[i - 1]) counted.timesDiffer = true;
			if (last[visit[i]!] === s) counted.sameVisit = true;
			last[visit[i]!] = s;
		}
	}
	counted.distinctTimes = times.size;
	return counted;
}

/** How many different gaps lie between two rows of a subject, counted up to three; equal to nine digits is equal. */
function distinctGaps(design: ModelDesign, along: 'time' | 'visit'): number {
	const { subjectStart: start, time, visit } = design;
	const found: number[] = [];
	for (let s = 0; s + 1 < start.length && found.length < 3; s++)
		for (let i = start[s]!; i < start[s + 1]!; i++)
			for (let j = start[s]!; j < i; j++) {
				const gap =
					along === 'visit' ? Math.abs(visit[i]! - visit[j]!) : Math.abs(time[i]! - time[j]!);
				const size = Math.abs(time[i]!) * 1e-15 + gap * 1e-9;
				if (gap > 0 && found.every((g) => Math.abs(g - gap) > size)) found.push(gap);
			}
	return found.length;
}

/** Pairs of visits no subject has both of. */
function unseenPair(design: ModelDesign): [string, string] | null {
	const k = design.visits.length;
	const seen = new Uint8Array(k * k);
	const { subjectStart: start, visit } = design;
	for (let s = 0; s + 1 < start.length; s++)
		for (let i = start[s]!; i < start[s + 1]!; i++)
			for (let j = start[s]!; j <= i; j++)
				seen[visit[i]! * k + visit[j]!] = seen[visit[j]! * k + visit[i]!] = 1;
	for (let a = 0; a < k; a++)
		for (let b = 0; b <= a; b++)
			if (!seen[a * k + b]) return [design.visits[b]!, design.visits[a]!];
	return null;
}

/** The largest lag in visits at which no subject has two rows, from 1 up; 0 when each lag is seen. */
function unseenLag(design: ModelDesign): number {
	const k = design.visits.length;
	const seen = new Uint8Array(k);
	const { subjectStart: start, visit } = design;
	for (let s = 0; s + 1 < start.length; s++)
		for (let i = start[s]!; i < start[s + 1]!; i++)
			for (let j = start[s]!; j < i; j++) seen[Math.abs(visit[i]! - visit[j]!)] = 1;
	for (let lag = 1; lag < k; lag++) if (!seen[lag]) return lag;
	return 0;
}

/**
 * Refuses a dependence that this design cannot carry, whatever the outcomes are.
 *
 * Errors: `not-identified`, `one-observation-per-subject`, `too-few-subjects`, `too-few-observations`, `bad-option`.
 */
export function refuseUnidentifiedModel(design: ModelDesign, d: Dependence): void {
	refuseUnidentifiedDependence(d);
	const { structure, along, varianceBy } = d.errors;
	const byVisit =
		d.visitEffects ||
		varianceBy === 'visit' ||
		structure === 'toeplitz' ||
		structure === 'unstructured' ||
		(isSerial(d) && along === 'visit');
	if (byVisit && design.visits.length === 0) {
		throw new StatsError(
			'bad-option',
			'This dependence goes by visit, and the data have no visit column. Name one in the plan.'
		);
	}
	if (byVisit && design.visits.length < 2) {
		refuse('This dependence goes by visit, and the data have one visit only.', { visits: 1 });
	}
	if (d.visitEffects && design.timeInMean === 'categorical') {
		refuse(
			'Visit effects shared by all subjects cannot be told from visits as categories in the mean. Leave one of them out.'
		);
	}
	if (varianceBy === 'group' && design.groups.length === 0) {
		throw new StatsError(
			'bad-option',
			'A variance for each group needs a group column. Name one in the plan.'
		);
	}
	const c = countsOf(design);
	const facts = { subjects: c.subjects };
	if (d.visitEffects && c.subjects < 2) {
		refuse(
			'With one subject, an effect shared by all subjects at a visit cannot be told from the residual.',
			facts
		);
	}
	if (c.most === 1 && (d.subjectEffects !== 'none' || structure !== 'independent')) {
		throw new StatsError(
			'one-observation-per-subject',
			'Each subject was seen once, so neither a lasting difference between subjects nor a dependence between visits can be estimated. Fit independent errors, or wait for more visits.',
			facts
		);
	}
	if (d.subjectEffects !== 'none' && c.subjects < 2) {
		throw new StatsError(
			'too-few-subjects',
			'One subject says nothing of how subjects differ. Leave the subject effects out.',
			facts
		);
	}
	if (hasSlope(d)) {
		if (!c.timesDiffer)
			refuse(
				'No subject was seen at two different times, so slopes of subjects cannot be estimated.'
			);
		if (
			c.most < 3 &&
			d.subjectEffects === 'level-and-slope' &&
			structure === 'independent' &&
			c.distinctTimes <= 2 &&
			varianceBy === 'none' &&
			!d.visitEffects
		) {
			refuse(
				'With two occasions per subject at the same two times, level, slope and residual cannot be told apart: three covariances are all that is seen. Leave the slope out.',
				{ occasions: 2 }
			);
		}
	}
	if (isSerial(d)) {
		if (along === 'time' && structure === 'serial' && c.sameTime)
			refuse(
				'A subject has two outcomes at the same time, where serial errors without noise would have to be equal. Add measurement noise, or go by visit.'
			);
		if (along === 'visit' && c.sameVisit)
			refuse('A subject has two outcomes at the same visit, so errors cannot go by visit.');
		const gaps = distinctGaps(design, along);
		const needed = 1 + (structure === 'serial-with-noise' ? 1 : 0) + (hasLevel(d) ? 1 : 0);
		if (gaps < needed) {
			const parts = [
				...(hasLevel(d) ? ['a lasting level'] : []),
				'serial errors',
				...(structure === 'serial-with-noise' ? ['measurement noise'] : [])
			];
			refuse(
				`Within subjects only ${gaps} different ${gaps === 1 ? 'gap' : 'gaps'} between occasions ${gaps === 1 ? 'is' : 'are'} seen, and ${parts.join(', ').replace(/, ([^,]*)$/, ' and $1')} can only be told apart by ${needed} or more. Leave a part out.`,
				{ gaps, needed }
			);
		}
	}
	if (
		structure === 'toeplitz' ||
		structure === 'unstructured' ||
		(structure === 'compound-symmetry' && varianceBy === 'visit')
	) {
		if (c.sameVisit)
			refuse('A subject has two outcomes at the same visit, so errors cannot go by visit.');
	}
	if (structure === 'unstructured') {
		const pair = unseenPair(design);
		if (pair)
			refuse(
				`No subject was seen at both visit ${pair[0]} and visit ${pair[1]}, so their covariance cannot be estimated. Choose a structure with fewer parameters.`,
				{ first: pair[0], second: pair[1] }
			);
		if (c.subjects <= design.visits.length)
			throw new StatsError(
				'too-few-subjects',
				`${c.subjects} subjects cannot carry an unstructured covariance over ${design.visits.length} visits; more subjects than visits are needed.`,
				{ ...facts, visits: design.visits.length }
			);
	}
	if (structure === 'toeplitz') {
		const lag = unseenLag(design);
		if (lag > 0)
			refuse(
				`No subject was seen at two visits ${lag} apart, so the correlation at that lag cannot be estimated.`,
				{ lag }
			);
	}
	const variances =
		d.errors.structure === 'unstructured'
			? (design.visits.length * (design.visits.length + 1)) / 2
			: 1;
	if (design.n - design.p < Math.min(variances, 1) + (d.subjectEffects === 'none' ? 0 : 1)) {
		throw new StatsError(
			'too-few-observations',
			`${design.n} usable rows cannot carry ${design.p} coefficients and the variances of this model.`,
			{ observations: design.n, coefficients: design.p }
		);
	}
}

/** Residual sum of squares ÷ sum of squares about the mean, below which rounding is all that is left. */
const NOTHING_LEFT = 1e-24;
const SMALLEST = 1e-80;
const LARGEST = 1e80;

/** Errors: `not-finite`, `constant-outcome`, `perfect-fit`, `out-of-range`. */
export function refuseWithoutVariation({ y, residual, design }: PreparedModel): void {
	const { n } = design;
	let left = 0;
	for (const r of residual) left += r * r;
	let mean = 0;
	for (const v of y) mean += v / n;
	let spread = 0;
	for (const v of y) spread += (v - mean) ** 2;
	const finite = y.every(Number.isFinite);
	// A square that overflows is no fault of the number it came from.
	if (!finite || (Number.isNaN(left) && Number.isFinite(spread))) {
		throw new StatsError(
			'not-finite',
			'An outcome or a column of the mean is not a finite number.'
		);
	}
	if (y.every((v) => v === y[0])) {
		throw new StatsError(
			'constant-outcome',
			'Every outcome is the same, so there is no variation to explain.'
		);
	}
	if (!(spread / n > SMALLEST && spread / n < LARGEST && Number.isFinite(left))) {
		throw new StatsError(
			'out-of-range',
			'The outcomes are too large or too small to be squared safely. Put them in a unit nearer to 1.'
		);
	}
	if (
		left <= NOTHING_LEFT * spread + n * (Math.abs(mean) * Number.EPSILON) ** 2 ||
		n === design.p
	) {
		throw new StatsError(
			'perfect-fit',
			'The mean reproduces every outcome exactly, so no variance is left to estimate.'
		);
	}
}
