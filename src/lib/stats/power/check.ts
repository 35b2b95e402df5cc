import { StatsError } from '../errors.js';
import type { Question } from './types.js';

function refuse(sentence: string): never {
	throw new StatsError('bad-option', sentence);
}

/** Throws a `StatsError` with a sentence unless the question can be answered. */
export function checkQuestion(question: Question): void {
	if (question.question === 'mean-difference') {
		const { visits, baselineVisits, totalVariance, icc, analysis } = question;
		if (!Number.isInteger(visits) || visits < 1 || visits > 1000)
			refuse(`A subject has 1 to 1000 visits, not ${visits}.`);
		if (analysis !== 'follow-up' && !(Number.isInteger(baselineVisits) && baselineVisits >= 1))
			refuse(
				`The analysis ${analysis} needs at least one visit before treatment, not ${baselineVisits}.`
			);
		if (!(totalVariance > 0) || !Number.isFinite(totalVariance))
			refuse(`The total variance must be positive, not ${totalVariance}.`);
		if (!(icc >= 0 && icc < 1)) refuse(`The ICC must lie from 0 to below 1, not ${icc}.`);
		return;
	}
	const { times, dropout, variances } = question;
	const needed = question.question === 'slope-difference' ? 2 : 1;
	if (times.length < needed || times.length > 200)
		refuse(`This question needs ${needed} to 200 visits, not ${times.length}.`);
	times.forEach((t, j) => {
		if (!Number.isFinite(t) || (j > 0 && !(t > times[j - 1]!)))
			refuse(`Times of visits must increase; number ${j + 1} is ${t}.`);
	});
	if (question.question === 'slope-difference' && question.mean !== 'linear')
		refuse('A difference in slopes needs time as a straight line in the mean.');
	if (question.question === 'difference-at-visit') {
		if (!Number.isFinite(question.time)) refuse(`The time must be finite, not ${question.time}.`);
		if (question.mean === 'categorical' && !times.includes(question.time))
			refuse(
				`With visits as categories the time must be one of ${times.join(', ')}, not ${question.time}.`
			);
		const first = question.mean === 'categorical' ? times[0]! : 0;
		if (question.commonBaseline && question.time === first)
			refuse('With a common baseline the arms cannot differ there.');
	}
	for (const share of dropout) {
		if (share.length !== times.length)
			refuse(`Dropout needs a share for each of the ${times.length} visits, not ${share.length}.`);
		share.forEach((s, j) => {
			if (!(s >= (share[j - 1] ?? 0) && s < 1))
				refuse(
					`The share gone by each visit must lie from 0 to below 1 and never fall; number ${j + 1} is ${s}.`
				);
		});
	}
	const { residual, level, slope, levelSlopeCovariance: both } = variances;
	if (!(residual > 0) || !Number.isFinite(residual))
		refuse(`The residual variance must be positive, not ${residual}.`);
	if (!(level >= 0 && slope >= 0) || !Number.isFinite(level + slope))
		refuse(`Variances of level and slope must not be negative: ${level} and ${slope}.`);
	if (!(both * both <= level * slope * (1 + 1e-12)))
		refuse(
			`The covariance ${both} of level and slope is too large for variances ${level} and ${slope}.`
		);
}
