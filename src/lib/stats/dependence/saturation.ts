import { EigenvalueDecomposition, Matrix } from 'ml-matrix';
import { StatsError } from '../errors.js';
import type { PreparedModel } from '../fit/prepare-model.js';

/** Below this share of its length a direction of X is taken as constant within subjects, or within visits. */
const TOLERANCE = 1e-9;

/** How many directions of the mean (its orthonormal basis) are left when the means of each class are taken out. */
function directionsWithin(sums: Float64Array, counts: ArrayLike<number>, p: number): number {
	const taken = new Float64Array(p * p);
	for (let k = 0; k < counts.length; k++) {
		if (counts[k] === 0) continue;
		const by = 1 / counts[k]!;
		for (let i = 0; i < p; i++) {
			const f = sums[k * p + i]! * by;
			for (let j = 0; j < p; j++) taken[i * p + j]! += f * sums[k * p + j]!;
		}
	}
	const left = Matrix.eye(p);
	for (let i = 0; i < p; i++)
		for (let j = 0; j < p; j++) left.set(i, j, left.get(i, j) - taken[i * p + j]!);
	const lengths = new EigenvalueDecomposition(left, { assumeSymmetric: true }).realEigenvalues;
	return lengths.filter((l) => l > TOLERANCE).length;
}

/**
 * Refuses effects of subjects or visits that the mean already takes up whole.
 *
 * A level needs more subjects than there are coefficients that vary between subjects only, and more rows than subjects
 * and the other coefficients; visit effects more visits than coefficients that vary between visits only.
 * Errors: `too-few-subjects`, `too-few-observations`, `not-identified`.
 */
export function refuseSaturated({ design, rows, dependence }: PreparedModel): void {
	const { n, p } = design;
	const subjects = design.subjectStart.length - 1;
	const effects = dependence.subjectEffects;
	if (effects !== 'none' && effects !== 'slope') {
		const sums = new Float64Array(subjects * p);
		const counts = new Float64Array(subjects);
		for (let s = 0; s < subjects; s++)
			for (let i = design.subjectStart[s]!; i < design.subjectStart[s + 1]!; i++) {
				counts[s]!++;
				for (let j = 0; j < p; j++) sums[s * p + j]! += rows.a[i * rows.c + j]!;
			}
		const within = directionsWithin(sums, counts, p);
		const between = p - within;
		if (subjects <= between) {
			throw new StatsError(
				'too-few-subjects',
				`${subjects} ${subjects === 1 ? 'subject' : 'subjects'} cannot carry ${between} ${between === 1 ? 'coefficient' : 'coefficients'} that vary between subjects and a variance between them; at least ${between + 1} are needed.`,
				{ subjects, betweenSubjectCoefficients: between }
			);
		}
		if (n - subjects <= within) {
			throw new StatsError(
				'too-few-observations',
				`${n} usable rows on ${subjects} subjects cannot carry ${within} ${within === 1 ? 'coefficient' : 'coefficients'} that vary within subjects and a residual variance beside a lasting level; at least ${subjects + within + 1} rows are needed.`,
				{ observations: n, subjects, withinSubjectCoefficients: within }
			);
		}
	}
	if (rows.visits > 0) {
		const sums = new Float64Array(rows.visits * p);
		const counts = new Float64Array(rows.visits);
		for (let i = 0; i < n; i++) {
			counts[design.visit[i]!]!++;
			for (let j = 0; j < p; j++) sums[design.visit[i]! * p + j]! += rows.a[i * rows.c + j]!;
		}
		const seen = counts.filter((count) => count > 0).length;
		// Directions that are constant within each visit, out of as many as there are visits.
		const taken = p - directionsWithin(sums, counts, p);
		if (seen <= taken) {
			throw new StatsError(
				'not-identified',
				`The mean already moves freely from visit to visit (${taken} coefficients for ${seen} visits), so effects shared by all subjects at a visit cannot be told from it. Leave the visit effects out, or give the mean a simpler course.`,
				{ visits: seen, coefficients: taken }
			);
		}
	}
}
