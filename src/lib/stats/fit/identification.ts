import { EigenvalueDecomposition } from 'ml-matrix';
import type { Design } from '../design/design.js';
import { StatsError } from '../errors.js';
import type { CrossProducts } from './cross-products.js';
import { meanPart } from './weighted.js';

/** Below this share of its length a direction of X is taken as constant within subjects. */
const WITHIN_TOLERANCE = 1e-9;
/** Residual sum of squares ÷ sum of squares about the mean, below which rounding is all that is left. */
const NOTHING_LEFT = 1e-24;
/** Variances of the outcome whose third power can still be held. */
const SMALLEST = 1e-80;
const LARGEST = 1e80;

/**
 * Refuses a model that these data cannot carry, whatever the numbers turn out to be.
 *
 * A lasting offset needs more rows than subjects and coefficients together can absorb, and more subjects
 * than there are coefficients that vary between subjects only (the intercept among them).
 * Errors: `one-observation-per-subject`, `too-few-subjects`, `too-few-observations`, `perfect-fit`,
 * `out-of-range`.
 */
export function refuseUnidentified(
	design: Design,
	products: CrossProducts,
	randomIntercept: boolean
): void {
	const { n, p, subjects } = products;
	let left = 0;
	for (const r of products.residual) left += r * r;
	const mean = design.y.reduce((sum, y) => sum + y, 0) / n;
	const spread = design.y.reduce((sum, y) => sum + (y - mean) ** 2, 0);
	if (!(spread / n > SMALLEST && spread / n < LARGEST)) {
		throw new StatsError(
			'out-of-range',
			'The outcomes are too large or too small to be squared safely. Put them in a unit nearer to 1.'
		);
	}
	const size = Math.abs(mean) * Number.EPSILON;
	if (left <= NOTHING_LEFT * spread + n * size * size) {
		throw new StatsError(
			'perfect-fit',
			'The mean reproduces every outcome exactly, so no variance is left to estimate.'
		);
	}
	if (!randomIntercept) return;
	if (design.counts.mostPerSubject === 1) {
		throw new StatsError(
			'one-observation-per-subject',
			'Each subject was seen once, so a lasting offset cannot be told from the residual. Leave the offset out or wait for more visits.',
			{ subjects }
		);
	}
	const lengths = new EigenvalueDecomposition(meanPart(products.within), { assumeSymmetric: true })
		.realEigenvalues;
	const varyingWithin = lengths.filter((l) => l > WITHIN_TOLERANCE).length;
	const betweenOnly = p - varyingWithin;
	if (subjects <= betweenOnly) {
		throw new StatsError(
			'too-few-subjects',
			`${subjects} ${subjects === 1 ? 'subject' : 'subjects'} cannot carry ${betweenOnly} ${betweenOnly === 1 ? 'coefficient' : 'coefficients'} that vary between subjects and a variance between them; at least ${betweenOnly + 1} are needed.`,
			{ subjects, betweenSubjectCoefficients: betweenOnly }
		);
	}
	if (n - subjects <= varyingWithin) {
		throw new StatsError(
			'too-few-observations',
			`${n} usable rows on ${subjects} subjects cannot carry ${varyingWithin} ${varyingWithin === 1 ? 'coefficient' : 'coefficients'} that vary within subjects and a residual variance beside a lasting offset; at least ${subjects + varyingWithin + 1} rows are needed.`,
			{ observations: n, subjects, withinSubjectCoefficients: varyingWithin }
		);
	}
}
