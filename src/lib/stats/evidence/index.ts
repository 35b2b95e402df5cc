export {
	evidence,
	gatherEvidence,
	planEvidenceOf,
	type ColumnsEvidenceOptions
} from './evidence.js';
export { planEvidence, WEAK_SHARE } from './plan-evidence.js';
export { evidencePart, joinEvidence } from './refits.js';
export { RULED_OUT, SELDOM } from './verdict.js';
export type {
	Answer,
	Comparison,
	ComparisonName,
	EvidenceAnswers,
	EvidenceOptions,
	EvidencePart,
	EvidencePlan,
	EvidenceResult,
	FittedMember,
	UnfittedMember,
	Verdict as EvidenceVerdict
} from './types.js';
