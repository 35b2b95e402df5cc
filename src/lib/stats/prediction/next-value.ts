import type { Analysis } from '../analysis/analyse.js';
import { predictNext, predictor } from './predictor.js';
import type { NextValue, SubjectHistory, SubjectOccasion } from './occasion.js';

/**
 * The interval in which a subject's next outcome is expected, from the subject's own history and the fitted model.
 *
 * See `predictNext`, which gives the same from the coefficients alone.
 */
export function nextValue(
	analysis: Pick<Analysis, 'built' | 'fit' | 'result'>,
	history: SubjectHistory,
	next: SubjectOccasion,
	confidence = 0.95
): NextValue {
	return predictNext(predictor(analysis), history, next, confidence);
}
