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
export { nextValue } from './prediction/next-value.js';
export { predictNext, predictor, type Predictor } from './prediction/predictor.js';
export type { NextValue, SubjectHistory, SubjectOccasion } from './prediction/occasion.js';
export {
	subjectEffects,
	visitEffects,
	type PredictedEffect,
	type SubjectEffects,
	type VisitEffect
} from './prediction/subject-effects.js';
export { fittedRows, type FittedRows } from './prediction/conditional-fit.js';
export { fittedLines, type MeanLine, type MeanPoint } from './prediction/lines.js';
export { occasionsOf, type Due, type Occasions } from './missing/occasions.js';
export { missingPatterns, type MissingPattern } from './missing/patterns.js';
export { dropoutByGroup, type DropoutByGroup } from './missing/dropout.js';
export { historyTest, type HistoryTest } from './missing/history.js';
export {
	deltaSensitivity,
	poolSensitivity,
	sensitivityReplicates,
	type ContrastSensitivity,
	type Sensitivity,
	type SensitivityOptions,
	type SensitivityReplicates,
	type SensitivityRow
} from './missing/sensitivity.js';
export { poolEstimates, type Pooled } from './missing/pool.js';
export { residualsOf, type Residuals } from './diagnostics/residuals.js';
export {
	quantilePlot,
	type QuantilePlot,
	type QuantilePlotOptions,
	type QuantilePoint
} from './diagnostics/quantile-plot.js';
export {
	semivariogram,
	type Semivariogram,
	type SemivariogramBin
} from './diagnostics/semivariogram.js';
export {
	subjectInfluence,
	type ContrastWithout,
	type SubjectInfluence
} from './diagnostics/influence.js';
export { analyseGrowth } from './growth/analyse-growth.js';
export * from './monitoring/index.js';
export * from './evidence/index.js';
export * from './power/index.js';
export { randomStream, type RandomStream } from './numeric/random.js';
export type * from './types.js';
