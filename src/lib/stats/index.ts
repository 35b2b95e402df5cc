/** The public face of the statistics: import from here, not from the files behind it. */
export { ENGINE_VERSION } from './engine.js';
export type { Column, Columns } from './design/columns.js';
export { StatsError, statsErrorCodes, type StatsErrorCode } from './errors.js';
export { analyse, carryOut, type Analysis, type AnalysisOptions } from './analysis/analyse.js';
export type {
	AnalysedContrast,
	AnalysisResult,
	Component,
	Ratio,
	Tested
} from './analysis/result.js';
export { buildModelDesign, type BuiltDesign } from './design/build-model-design.js';
export * as contrasts from './design/contrasts.js';
export { readPlan } from './read-plan.js';
export { checkPlan } from './plan-rules.js';
export type * from './plan.js';
export {
	nextValue,
	type NextValue,
	type SubjectHistory,
	type SubjectOccasion
} from './prediction/next-value.js';
export { occasionsOf, type Due, type Occasions } from './missing/occasions.js';
export { missingPatterns, type MissingPattern } from './missing/patterns.js';
export { dropoutByGroup, type DropoutByGroup } from './missing/dropout.js';
export { historyTest, type HistoryTest } from './missing/history.js';
export { analyseGrowth } from './growth/analyse-growth.js';
export { buildDesign, type Design } from './design/design.js';
export { fitMixed, type Fit, type FitOptions } from './fit/fit-mixed.js';
export { precisionRule, type PrecisionRule } from './inference/degrees-of-freedom.js';
export { testContrast } from './inference/contrast.js';
export { effectiveSampleSize, intraclassCorrelation } from './inference/effective-size.js';
export { varianceIntervals } from './inference/variance-intervals.js';
export { subjectEffects } from './prediction/subject-effects.js';
export { fittedLines } from './prediction/lines.js';
export { marginalResiduals, residualPoints } from './prediction/residuals.js';
export * from './monitoring/index.js';
export * from './evidence/index.js';
export * from './power/index.js';
export { randomStream, type RandomStream } from './numeric/random.js';
export type * from './types.js';
