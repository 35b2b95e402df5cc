import { checkPlan } from './check-plan.js';
import { at, fieldsOf, numberIn, numbersIn, oneOf, refuseField } from './fields.js';
import { MOST_Z } from './conditional-power.js';
import {
	classicalKinds,
	spendingKinds,
	type EfficacyRule,
	type FutilityRule,
	type MonitoringPlan
} from './types.js';

/** A plan as it is written in a file: with what a look gave, when there is one. */
export interface WrittenMonitoringPlan extends MonitoringPlan {
	observed: { look: number; z: number } | null;
	/** Of the interval at stopping; 0.95 unless said otherwise. */
	confidence: number;
}

const keys = [
	'informationFractions',
	'sides',
	'alpha',
	'efficacy',
	'futility',
	'power',
	'observed',
	'confidence',
	'$schema'
];

/**
 * A monitoring plan from what was read as JSON, checked by hand: each refusal names the place and what is allowed.
 *
 * @param path where the plan stands in a larger one; empty when it is the whole
 * @throws StatsError `bad-option`
 */
export function readMonitoringPlan(value: unknown, path = ''): WrittenMonitoringPlan {
	const fields = fieldsOf(value, path, keys);
	const futility = readFutility(fields.futility ?? null, at(path, 'futility'));
	const fractions = numbersIn(fields.informationFractions, at(path, 'informationFractions'), {
		above: 0,
		to: 1
	});
	const plan: WrittenMonitoringPlan = {
		informationFractions: fractions,
		sides: oneOf(fields.sides, at(path, 'sides'), [1, 2] as const),
		alpha: numberIn(fields.alpha, at(path, 'alpha'), { above: 0, below: 1 }),
		efficacy: readEfficacy(fields.efficacy, at(path, 'efficacy')),
		futility,
		power:
			fields.power === undefined && futility
				? 1 - futility.beta
				: numberIn(fields.power, at(path, 'power'), { above: 0, below: 1 }),
		observed: null,
		confidence:
			fields.confidence === undefined
				? 0.95
				: numberIn(fields.confidence, at(path, 'confidence'), { above: 0, below: 1 })
	};
	const observed = fields.observed ?? null;
	if (observed !== null) {
		const here = at(path, 'observed');
		const { look, z } = fieldsOf(observed, here, ['look', 'z']);
		plan.observed = {
			look: numberIn(look, `${here}.look`, { from: 1, to: fractions.length, whole: true }),
			z: numberIn(z, `${here}.z`, { from: -MOST_Z, to: MOST_Z })
		};
	}
	checkPlan(plan);
	return plan;
}

function readEfficacy(value: unknown, path: string): EfficacyRule {
	if (value === undefined)
		refuseField(path, 'is missing: it must be an object with the keys kind, parameter.');
	const { kind, parameter } = fieldsOf(value, path, ['kind', 'parameter']);
	return {
		kind: oneOf(kind, `${path}.kind`, [...classicalKinds, ...spendingKinds]),
		parameter: readParameter(parameter, path)
	};
}

function readFutility(value: unknown, path: string): FutilityRule | null {
	if (value === null) return null;
	const { kind, parameter, beta, z } = fieldsOf(value, path, ['kind', 'parameter', 'beta', 'z']);
	const which = oneOf(kind, `${path}.kind`, [...spendingKinds, 'fixed'] as const);
	const lost = numberIn(beta, `${path}.beta`, { above: 0, below: 1 });
	if (which === 'fixed') return { kind: which, z: numbersIn(z, `${path}.z`), beta: lost };
	if (z !== undefined) refuseField(`${path}.z`, 'is for the kind fixed only.');
	return { kind: which, parameter: readParameter(parameter, path), beta: lost };
}

const readParameter = (value: unknown, path: string) =>
	value === undefined || value === null ? null : numberIn(value, `${path}.parameter`);
