/** The public face of group-sequential monitoring. */
export { boundariesOf, designMonitoring, efficacyBoundaries } from './boundaries.js';
export { normalEquivalent } from './compare.js';
export {
	conditionalPower,
	conditionalPowerFinalOnly,
	predictivePower,
	predictivePowerFinalOnly,
	trendOf,
	type Interim
} from './conditional-power.js';
export { monitor, type MonitoringResult, type ObservedLook, type PowerUnder } from './monitor.js';
export { operatingCharacteristics, type Operating } from './operating.js';
export { readMonitoringPlan, type WrittenMonitoringPlan } from './read-plan.js';
export {
	interimOf,
	runningBoundaries,
	stoppedAt,
	verdictAt,
	type RunningLook,
	type SeenLook,
	type Verdict
} from './running.js';
export { spentBy } from './spending.js';
export {
	repeatedInterval,
	stagewiseAnalysis,
	withOverrun,
	type StagewiseAnalysis,
	type Stopped
} from './stagewise.js';
export type * from './types.js';
