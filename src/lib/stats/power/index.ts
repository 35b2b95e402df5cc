/** The public face of planning a study: sample size and power, by formula and by simulation. */
export { planStudy, simulatedStudy, type DesignResult } from './plan-study.js';
export { readDesignPlan, type DesignPlan, type SimulationPlan } from './read-plan.js';
export { powerOf, sampleSize, type SampleSize, type TestPlan } from './sample-size.js';
export {
	joinReplicates,
	simulateReplicates,
	summariseReplicates,
	type AnalyseTrial,
	type Replicates,
	type Simulated,
	type SimulatedStudy,
	type SimulationSummary,
	type TrialEstimate
} from './simulate.js';
export { summaryMeasures } from './summary-measures.js';
export { drawTrial, firstSubjects, layoutOf, type TrialData } from './trial.js';
export { varianceOfDifference } from './information.js';
export type * from './types.js';
