import { StatsError } from './errors.js';
import {
	finiteNumber,
	isObject,
	listOf,
	objectOf,
	oneOf,
	or,
	orNull,
	recordOf,
	refusal,
	text,
	wholeNumber,
	yesOrNo,
	type Reader
} from './json-reading.js';
import { checkPlan } from './plan-rules.js';
import type {
	AnalysisPlan,
	DegreesOfFreedomRule,
	Dependence,
	Mean,
	PlanContrast,
	PlanCovariate,
	TimeInMean
} from './plan.js';

const time: Reader<TimeInMean> = (value, path) => {
	if (isObject(value) && 'knots' in value)
		return objectOf<{ knots: number[] }>({ knots: listOf(finiteNumber, 1) })(value, path);
	if (isObject(value) && 'degree' in value)
		return objectOf<{ degree: number }>({ degree: wholeNumber(1, 6) })(value, path);
	if (value === 'none' || value === 'linear' || value === 'categorical') return value;
	throw refusal(
		path,
		value,
		'“none”, “linear”, “categorical”, {"knots": […]} or {"degree": 1 to 6}'
	);
};

const covariate: Reader<PlanCovariate> = (value, path) => {
	if (!isObject(value)) throw refusal(path, value, 'an object with kind and name');
	const kind = oneOf('numeric', 'categorical', 'baseline')(value.kind, `${path}.kind`);
	if (kind === 'baseline')
		return objectOf<{ kind: 'baseline' }>({ kind: oneOf('baseline') })(value, path);
	if (kind === 'numeric')
		return objectOf<{ name: string; kind: 'numeric' }>({ name: text, kind: oneOf('numeric') })(
			value,
			path
		);
	const { levels, ...rest } = objectOf<{
		name: string;
		kind: 'categorical';
		levels: string[] | null;
	}>({ name: text, kind: oneOf('categorical'), levels: orNull(listOf(text, 2)) })(value, path);
	return levels ? { ...rest, levels } : rest;
};

const plainMean: Mean = {
	time: 'linear',
	groupByTime: true,
	commonBaseline: false,
	covariates: []
};
const plainErrors: Dependence['errors'] = {
	structure: 'independent',
	along: 'time',
	varianceBy: 'none'
};

const contrast = objectOf<PlanContrast>({
	name: text,
	weights: recordOf(finiteNumber, 'an object with a weight for at least one coefficient name')
});

const plan = objectOf<
	Omit<AnalysisPlan, 'degreesOfFreedom'> & { degreesOfFreedom: DegreesOfFreedomRule | null }
>({
	outcome: text,
	scale: or(oneOf('identity', 'log'), 'identity'),
	subject: text,
	time: text,
	visit: orNull(text),
	group: orNull(text),
	mean: or(
		objectOf<Mean>({
			time: or(time, plainMean.time),
			groupByTime: or(yesOrNo, plainMean.groupByTime),
			commonBaseline: or(yesOrNo, plainMean.commonBaseline),
			covariates: or(listOf(covariate), [])
		}),
		plainMean
	),
	subjectEffects: or(
		oneOf('none', 'level', 'level-and-slope', 'level-and-slope-uncorrelated', 'slope'),
		'level'
	),
	visitEffects: or(yesOrNo, false),
	errors: or(
		objectOf<Dependence['errors']>({
			structure: or(
				oneOf(
					'independent',
					'serial',
					'serial-with-noise',
					'compound-symmetry',
					'toeplitz',
					'unstructured'
				),
				plainErrors.structure
			),
			along: or(oneOf('time', 'visit'), plainErrors.along),
			varianceBy: or(oneOf('none', 'visit', 'group'), plainErrors.varianceBy)
		}),
		plainErrors
	),
	method: or(oneOf('reml', 'ml'), 'reml'),
	degreesOfFreedom: or<DegreesOfFreedomRule | null>(
		oneOf('kenward-roger', 'satterthwaite', 'naive'),
		null
	),
	confidence: or(finiteNumber, 0.95),
	contrasts: or(listOf(contrast), [])
});

/**
 * A plan that came as JSON, checked, with every default filled in.
 *
 * Left out: scale identity, no visit, no group, mean linear with a course for each group, a level of each subject,
 * independent errors, REML, Kenward–Roger under REML and Satterthwaite under ML, confidence 0.95, no contrast.
 * Errors: `bad-plan` (the sentence names the path and what is allowed; a key that is not known is refused), and those of
 * `checkPlan`.
 */
export function readPlan(value: unknown): AnalysisPlan {
	const read = plan(value, '');
	const settled: AnalysisPlan = {
		...read,
		degreesOfFreedom:
			read.degreesOfFreedom ?? (read.method === 'reml' ? 'kenward-roger' : 'satterthwaite')
	};
	checkPlan(settled);
	const names = settled.contrasts!.map((c) => c.name);
	const twice = names.find((name, i) => names.indexOf(name) !== i);
	if (twice !== undefined) {
		throw new StatsError('bad-plan', `Two contrasts of the plan are called “${twice}”.`, {
			path: 'contrasts'
		});
	}
	return settled;
}
