import { readFileSync } from 'node:fs';
import Ajv from 'ajv';
import { describe, expect, test } from 'vitest';
import { StatsError } from './errors.js';
import { readPlan } from './read-plan.js';

const schema = JSON.parse(
	readFileSync(new URL('./schema/plan.schema.json', import.meta.url), 'utf8')
) as object;
const accepts = new Ajv().compile(schema);

const least = { outcome: 'y', subject: 'id', time: 't' };
const withVisit = { ...least, visit: 'v' };
const withMean = (mean: object) => ({ ...withVisit, group: 'arm', mean });
const withErrors = (errors: object) => ({ ...withVisit, subjectEffects: 'none', errors });
const withContrast = (contrast: unknown) => ({ ...least, contrasts: [contrast] });

describe('a plan that can be carried out', () => {
	test('has every default filled in', () => {
		expect(readPlan(least)).toEqual({
			outcome: 'y',
			scale: 'identity',
			subject: 'id',
			time: 't',
			visit: null,
			group: null,
			mean: { time: 'linear', groupByTime: true, commonBaseline: false, covariates: [] },
			subjectEffects: 'level',
			visitEffects: false,
			errors: { structure: 'independent', along: 'time', varianceBy: 'none' },
			method: 'reml',
			degreesOfFreedom: 'kenward-roger',
			confidence: 0.95,
			contrasts: []
		});
		expect(readPlan({ ...least, method: 'ml' }).degreesOfFreedom).toBe('satterthwaite');
	});

	const good: [string, object][] = [
		['the least', least],
		['nulls for what is not there', { ...least, visit: null, group: null }],
		['a log scale', { ...least, scale: 'log' }],
		['no time', withMean({ time: 'none' })],
		['knots', withMean({ time: { knots: [1, 2.5] } })],
		['a polynomial', withMean({ time: { degree: 6 } })],
		['visits as categories', withMean({ time: 'categorical', commonBaseline: true })],
		[
			'covariates',
			withMean({
				covariates: [
					{ name: 'bmi', kind: 'numeric' },
					{ name: 'site', kind: 'categorical', levels: ['a', 'b'] },
					{ name: 'sex', kind: 'categorical' },
					{ kind: 'baseline' }
				]
			})
		],
		['serial errors with a level', { ...least, errors: { structure: 'serial' } }],
		['unstructured errors', withErrors({ structure: 'unstructured', along: 'visit' })],
		['a variance for each visit', withErrors({ structure: 'toeplitz', varianceBy: 'visit' })],
		['visit effects', { ...withVisit, visitEffects: true }],
		['slopes', { ...least, subjectEffects: 'level-and-slope' }],
		['ML', { ...least, method: 'ml', degreesOfFreedom: 'satterthwaite', confidence: 0.9 }],
		['a contrast', withContrast({ name: 'yearly change', weights: { time: 1 } })]
	];
	test.each(good)('%s: read, and valid by the schema', (_, plan) => {
		const settled = readPlan(plan);
		expect(settled).toMatchObject(plan);
		expect(accepts(plan), JSON.stringify(accepts.errors)).toBe(true);
		// What was filled in is itself a plan.
		expect(readPlan(settled)).toEqual(settled);
		expect(accepts(settled), JSON.stringify(accepts.errors)).toBe(true);
	});
});

describe('a plan of the wrong shape is refused by reader and schema', () => {
	const bad: [unknown, RegExp][] = [
		[null, /^The plan is null; it must be an object/],
		[[], /The plan is a list/],
		['plan', /The plan is “plan”/],
		[{ subject: 'id', time: 't' }, /outcome is missing; it must be text/],
		[{ ...least, time: 3 }, /time is 3; it must be text/],
		[{ ...least, outcome: '' }, /outcome is “”/],
		[{ ...least, colour: 'red' }, /colour is not known; a plan may hold outcome, scale/],
		[{ ...least, scale: 'root' }, /scale is “root”; it must be “identity” or “log”/],
		[{ ...least, visit: '' }, /visit is “”/],
		[{ ...least, visitEffects: 'yes' }, /visitEffects is “yes”; it must be true or false/],
		[{ ...least, method: 'REML' }, /method is “REML”; it must be “reml” or “ml”/],
		[{ ...least, degreesOfFreedom: 'none' }, /degreesOfFreedom is “none”/],
		[{ ...least, confidence: '0.9' }, /confidence is “0.9”; it must be a finite number/],
		[{ ...least, confidence: 1 }, /confidence\) is 1; it must lie between 0 and 1/],
		[{ ...least, subjectEffects: 'intercept' }, /subjectEffects is “intercept”/],
		[{ ...least, errors: { structure: 'ar1' } }, /errors\.structure is “ar1”/],
		[{ ...least, errors: { rho: 1 } }, /errors\.rho is not known; errors may hold structure/],
		[{ ...least, errors: 'serial' }, /errors is “serial”; it must be an object/],
		[withMean({ time: 'quadratic' }), /mean\.time is “quadratic”/],
		[
			withMean({ time: { degree: 7 } }),
			/mean\.time\.degree is 7; it must be a whole number from 1/
		],
		[withMean({ time: { degree: 1.5 } }), /mean\.time\.degree is 1\.5/],
		[
			withMean({ time: { knots: [] } }),
			/mean\.time\.knots is a list; it must be a list that is not/
		],
		[withMean({ time: { knots: [1, 1] } }), /each given once/],
		[withMean({ time: { knots: ['1'] } }), /mean\.time\.knots\[0\] is “1”/],
		[withMean({ time: { knots: [1], degree: 2 } }), /mean\.time\.degree is not known/],
		[withMean({ groupByTime: 1 }), /mean\.groupByTime is 1/],
		[withMean({ covariates: 'bmi' }), /mean\.covariates is “bmi”; it must be a list/],
		[withMean({ covariates: [{ name: 'bmi' }] }), /covariates\[0\]\.kind is missing/],
		[withMean({ covariates: ['bmi'] }), /covariates\[0\] is “bmi”/],
		[withMean({ covariates: [{ kind: 'numeric' }] }), /covariates\[0\]\.name is missing/],
		[
			withMean({ covariates: [{ kind: 'baseline', name: 'y0' }] }),
			/covariates\[0\]\.name is not known/
		],
		[
			withMean({ covariates: [{ kind: 'numeric', name: 'bmi', levels: ['a', 'b'] }] }),
			/covariates\[0\]\.levels is not known/
		],
		[
			withMean({ covariates: [{ kind: 'categorical', name: 'site', levels: ['a'] }] }),
			/covariates\[0\]\.levels is a list/
		],
		[withContrast({ name: 'a' }), /contrasts\[0\]\.weights is missing/],
		[withContrast({ name: 'a', weights: {} }), /contrasts\[0\]\.weights is an object/],
		[
			withContrast({ name: 'a', weights: { time: '1' } }),
			/contrasts\[0\]\.weights\[“time”\] is “1”/
		],
		[withContrast({ name: 'a', weights: [1] }), /contrasts\[0\]\.weights is a list/],
		[withContrast('slope'), /contrasts\[0\] is “slope”/]
	];
	test.each(bad)('case %#', (plan, sentence) => {
		expect(accepts(plan)).toBe(false);
		let thrown: unknown;
		try {
			readPlan(plan);
		} catch (error) {
			thrown = error;
		}
		expect(thrown).toBeInstanceOf(StatsError);
		expect((thrown as StatsError).code).toBe('bad-plan');
		expect((thrown as StatsError).message).toMatch(sentence);
	});
});

describe('a plan whose parts do not fit together is refused by the reader', () => {
	const group = { ...withVisit, group: 'arm' };
	const bad: [string, object, RegExp][] = [
		['bad-plan', { ...least, mean: { time: 'categorical' } }, /Visits as categories.*“visit”/],
		['bad-plan', { ...least, visitEffects: true }, /A visit effect \(visitEffects\) needs/],
		['bad-plan', { ...withErrors({ structure: 'toeplitz' }), visit: null }, /structure toeplitz/],
		['bad-plan', { ...least, errors: { structure: 'serial', along: 'visit' } }, /along visits/],
		['bad-plan', { ...least, errors: { varianceBy: 'visit' } }, /variance for each visit/],
		['bad-plan', { ...least, errors: { varianceBy: 'group' } }, /variance for each group/],
		['bad-plan', { ...least, time: 'y' }, /“y” is the outcome and also time/],
		[
			'bad-plan',
			withMean({ commonBaseline: true, covariates: [{ kind: 'baseline' }] }),
			/exclude each other/
		],
		['bad-plan', withMean({ commonBaseline: true, groupByTime: false }), /needs time in the mean/],
		['bad-plan', withMean({ commonBaseline: true, time: 'none' }), /needs time in the mean/],
		[
			'bad-plan',
			withMean({ covariates: [{ kind: 'baseline' }, { kind: 'baseline' }] }),
			/named twice/
		],
		[
			'bad-plan',
			{
				...least,
				contrasts: [
					{ name: 'a', weights: { time: 1 } },
					{ name: 'a', weights: { time: 2 } }
				]
			},
			/Two contrasts of the plan are called “a”/
		],
		[
			'not-identified',
			{ ...group, errors: { structure: 'unstructured' } },
			/level of each subject/
		],
		[
			'not-identified',
			{ ...group, subjectEffects: 'level-and-slope', errors: { structure: 'compound-symmetry' } },
			/errors that are compound-symmetry/
		],
		[
			'not-identified',
			{ ...group, visitEffects: true, mean: { time: 'categorical' } },
			/visit effect shared by all/
		],
		[
			'kenward-roger-needs-reml',
			{ ...least, method: 'ml', degreesOfFreedom: 'kenward-roger' },
			/REML only/
		]
	];
	test.each(bad)('%s: case %#', (code, plan, sentence) => {
		let thrown: unknown;
		try {
			readPlan(plan);
		} catch (error) {
			thrown = error;
		}
		expect(thrown).toBeInstanceOf(StatsError);
		expect((thrown as StatsError).message).toMatch(sentence);
		expect((thrown as StatsError).code).toBe(code);
	});
});
