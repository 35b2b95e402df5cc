import {
	at,
	fieldsOf,
	numberIn,
	numbersIn,
	oneOf,
	refuseField,
	type Fields
} from '../monitoring/fields.js';
import { readMonitoringPlan } from '../monitoring/read-plan.js';
import { checkQuestion } from './check.js';
import type { TestPlan } from './sample-size.js';
import type { Question, VisitDesign } from './types.js';

export interface SimulationPlan {
	replicates: number;
	seed: number;
	/** Null: as many as the machine has processors. Plays no part in the result. */
	workers: number | null;
	analysis: 'summary-measures';
	confidence: number;
}

/** A plan of a study as it is written in a file. */
export interface DesignPlan {
	question: Question;
	test: TestPlan;
	/** Either the power wanted or the subjects there are, [arm 0, arm 1]. */
	wanted: { power: number } | { subjects: [number, number] };
	simulation: SimulationPlan | null;
}

const questions = ['slope-difference', 'difference-at-visit', 'mean-difference'] as const;
const common = [
	'question',
	'difference',
	'alpha',
	'sides',
	'allocation',
	'power',
	'subjects',
	'looks',
	'simulation',
	'$schema'
];
const forVisits = ['times', 'variances', 'dropout', 'mean', 'commonBaseline'];
const keysOf: Record<(typeof questions)[number], string[]> = {
	'slope-difference': [...common, ...forVisits],
	'difference-at-visit': [...common, ...forVisits, 'time'],
	'mean-difference': [...common, 'visits', 'totalVariance', 'icc', 'analysis', 'baselineVisits']
};

/**
 * A design plan from what was read as JSON, checked by hand: each refusal names the place and what is allowed.
 *
 * @throws StatsError `bad-option`
 */
export function readDesignPlan(value: unknown): DesignPlan {
	if (typeof value !== 'object' || value === null || Array.isArray(value))
		fieldsOf(value, '', common);
	const kind = oneOf((value as Fields).question, 'question', questions);
	const fields = fieldsOf(value, '', keysOf[kind]);
	const test: TestPlan = {
		difference: numberIn(fields.difference, 'difference'),
		alpha: optional(fields.alpha, 0.05, (v) => numberIn(v, 'alpha', { above: 0, below: 1 })),
		sides: optional(fields.sides, 2, (v) => oneOf(v, 'sides', [1, 2] as const)),
		allocation: optional(fields.allocation, 0.5, (v) =>
			numberIn(v, 'allocation', { above: 0, below: 1 })
		),
		looks: null
	};
	if ((fields.power === undefined) === (fields.subjects === undefined))
		refuseField('power', 'or subjects must be given, and not both.');
	const wanted: DesignPlan['wanted'] =
		fields.power === undefined
			? { subjects: readSubjects(fields.subjects, test.allocation) }
			: { power: numberIn(fields.power, 'power', { above: 0, below: 1 }) };
	if (fields.looks !== undefined && fields.looks !== null)
		test.looks = readLooks(fields.looks, test, 'power' in wanted ? wanted.power : null);
	const question = kind === 'mean-difference' ? readMeans(fields) : readVisits(kind, fields);
	checkQuestion(question);
	return {
		question,
		test,
		wanted,
		simulation: optional(fields.simulation, null, readSimulation)
	};
}

function optional<T, D>(value: unknown, left: D, read: (value: unknown) => T): T | D {
	return value === undefined || value === null ? left : read(value);
}

/** A total, split by the allocation, or each arm by itself. */
function readSubjects(value: unknown, allocation: number): [number, number] {
	const whole = { from: 1, to: 1e9, whole: true };
	if (typeof value === 'number') {
		const total = numberIn(value, 'subjects', { ...whole, from: 2 });
		const treated = Math.min(total - 1, Math.max(1, Math.round(total * allocation)));
		return [total - treated, treated];
	}
	const { arm0, arm1 } = fieldsOf(value, 'subjects', ['arm0', 'arm1']);
	return [numberIn(arm0, 'subjects.arm0', whole), numberIn(arm1, 'subjects.arm1', whole)];
}

function readLooks(value: unknown, test: TestPlan, power: number | null): TestPlan['looks'] {
	const { informationFractions, efficacy, futility } = fieldsOf(value, 'looks', [
		'informationFractions',
		'efficacy',
		'futility'
	]);
	const { alpha, sides } = test;
	const left = power ?? (futility ? undefined : 0.9);
	const plan = readMonitoringPlan(
		{ informationFractions, efficacy, futility: futility ?? null, alpha, sides, power: left },
		'looks'
	);
	return {
		informationFractions: plan.informationFractions,
		efficacy: plan.efficacy,
		futility: plan.futility ?? null
	};
}

function readVisits(kind: 'slope-difference' | 'difference-at-visit', fields: Fields): Question {
	const times = numbersIn(fields.times, 'times');
	const { residual, level, slope, levelSlopeCovariance } = fieldsOf(fields.variances, 'variances', [
		'residual',
		'level',
		'slope',
		'levelSlopeCovariance'
	]);
	const zeroOr = (v: unknown, key: string) =>
		optional(v, 0, (found) => numberIn(found, at('variances', key), { from: 0 }));
	const design: VisitDesign = {
		times,
		variances: {
			residual: numberIn(residual, 'variances.residual', { above: 0 }),
			level: zeroOr(level, 'level'),
			slope: zeroOr(slope, 'slope'),
			levelSlopeCovariance: optional(levelSlopeCovariance, 0, (v) =>
				numberIn(v, 'variances.levelSlopeCovariance')
			)
		},
		dropout: readDropout(fields.dropout, times.length),
		mean: optional(fields.mean, kind === 'slope-difference' ? 'linear' : 'categorical', (v) =>
			oneOf(v, 'mean', ['linear', 'categorical'] as const)
		),
		commonBaseline: optional(fields.commonBaseline, false, (v) => {
			if (typeof v !== 'boolean') refuseField('commonBaseline', 'must be true or false.');
			return v;
		})
	};
	if (kind === 'slope-difference') return { question: kind, ...design };
	const time = optional(fields.time, times.at(-1) ?? NaN, (v) => numberIn(v, 'time'));
	return { question: kind, time, ...design };
}

/** One list for both arms, or each arm its own; nobody leaves when it is left out. */
function readDropout(value: unknown, visits: number): VisitDesign['dropout'] {
	const range = { from: 0, below: 1 };
	if (value === undefined || value === null) {
		const stays = new Array<number>(visits).fill(0);
		return [stays, stays];
	}
	if (Array.isArray(value)) {
		const both = numbersIn(value, 'dropout', range);
		return [both, both];
	}
	const { arm0, arm1 } = fieldsOf(value, 'dropout', ['arm0', 'arm1']);
	return [numbersIn(arm0, 'dropout.arm0', range), numbersIn(arm1, 'dropout.arm1', range)];
}

function readMeans(fields: Fields): Question {
	const analysis = optional(fields.analysis, 'follow-up', (v) =>
		oneOf(v, 'analysis', ['follow-up', 'change', 'ancova'] as const)
	);
	return {
		question: 'mean-difference',
		visits: numberIn(fields.visits, 'visits', { from: 1, to: 1000, whole: true }),
		totalVariance: numberIn(fields.totalVariance, 'totalVariance', { above: 0 }),
		icc: numberIn(fields.icc, 'icc', { from: 0, below: 1 }),
		analysis,
		baselineVisits: optional(fields.baselineVisits, analysis === 'follow-up' ? 0 : 1, (v) =>
			numberIn(v, 'baselineVisits', { from: 0, to: 1000, whole: true })
		)
	};
}

function readSimulation(value: unknown): SimulationPlan {
	const fields = fieldsOf(value, 'simulation', [
		'replicates',
		'seed',
		'workers',
		'analysis',
		'confidence'
	]);
	return {
		replicates: numberIn(fields.replicates, 'simulation.replicates', {
			from: 2,
			to: 1_000_000,
			whole: true
		}),
		seed: numberIn(fields.seed, 'simulation.seed', {
			from: 0,
			to: Number.MAX_SAFE_INTEGER,
			whole: true
		}),
		workers: optional(fields.workers, null, (v) =>
			numberIn(v, 'simulation.workers', { from: 1, to: 64, whole: true })
		),
		analysis: optional(fields.analysis, 'summary-measures', (v) =>
			oneOf(v, 'simulation.analysis', ['summary-measures'] as const)
		),
		confidence: optional(fields.confidence, 0.95, (v) =>
			numberIn(v, 'simulation.confidence', { above: 0, below: 1 })
		)
	};
}
