import { readFileSync } from 'node:fs';
import { describe, expect, test } from 'vitest';
import { monitor } from '../monitoring/monitor.js';
import { readMonitoringPlan } from '../monitoring/read-plan.js';
import { planStudy } from '../power/plan-study.js';
import { readDesignPlan } from '../power/read-plan.js';

type Plan = Record<string, unknown>;
interface Schema {
	properties: Record<
		string,
		{ enum?: unknown[]; properties?: Record<string, { enum?: unknown[] }> }
	>;
	required: string[];
	examples: Plan[];
}
const schemaOf = (name: string) =>
	JSON.parse(readFileSync(new URL(`./${name}.schema.json`, import.meta.url), 'utf8')) as Schema;

const monitoring = schemaOf('monitoring-plan');
const design = schemaOf('design-plan');

/** The keys a refusal lists as known. */
function knownKeys(read: (plan: unknown) => unknown, plan: Plan): string[] {
	try {
		read({ ...plan, nonsense: 1 });
	} catch (error) {
		const listed = /The keys are (.*)\.$/.exec((error as Error).message)?.[1];
		return listed?.split(', ').sort() ?? [];
	}
	return [];
}

test('the plans that the README shows are read and answered', () => {
	const readme = readFileSync(new URL('../../../../README.md', import.meta.url), 'utf8');
	const shown = [...readme.matchAll(/```json\n([\s\S]*?)```/g)].map(
		(m) => JSON.parse(m[1]!) as Plan
	);
	const [boundaries, study] = ['informationFractions', 'question'].map((key) =>
		shown.find((plan) => key in plan)!
	);
	expect(monitor(readMonitoringPlan(boundaries)).conditionalPower).not.toBeNull();
	expect(planStudy(readDesignPlan(study)).power).toBeGreaterThanOrEqual(0.9);
});

describe('the published schemas say what the readers take', () => {
	test('every example of a schema is read and answered', () => {
		for (const plan of monitoring.examples)
			expect(monitor(readMonitoringPlan(plan)).drift).toBeGreaterThan(0);
		for (const plan of design.examples)
			expect(planStudy(readDesignPlan(plan)).power).toBeGreaterThan(0);
	});

	test('keys', () => {
		const [first] = monitoring.examples;
		expect(knownKeys(readMonitoringPlan, first!)).toEqual(
			Object.keys(monitoring.properties).sort()
		);
		const read = design.examples.flatMap((plan) => knownKeys(readDesignPlan, plan));
		expect([...new Set(read)].sort()).toEqual(Object.keys(design.properties).sort());
	});

	test.each([
		['efficacy', 'spending-power'],
		['futility', 'spending-gamma']
	])('every kind of %s is read, and no other', (which) => {
		const kinds = monitoring.properties[which]!.properties!.kind!.enum as string[];
		const plan = monitoring.examples[0]!;
		for (const kind of kinds) {
			const parameter = /tsiatis|power|gamma/.test(kind) ? 0.3 : null;
			const rule = kind === 'fixed' ? { kind, z: [0, 0.5] } : { kind, parameter };
			const beta = which === 'futility' ? { beta: 0.1 } : {};
			expect(() => readMonitoringPlan({ ...plan, [which]: { ...rule, ...beta } })).not.toThrow();
		}
		expect(() => readMonitoringPlan({ ...plan, [which]: { kind: 'haybittle' } })).toThrow(
			`${which}.kind must be one of ${kinds.join(', ')}, not "haybittle".`
		);
	});

	test('what is required is missed by name', () => {
		for (const key of monitoring.required) {
			const { [key]: _, ...rest } = monitoring.examples[0]!;
			expect(() => readMonitoringPlan(rest)).toThrow(new RegExp(`^${key} is missing`));
		}
		for (const key of design.required) {
			const { [key]: _, ...rest } = design.examples[0]!;
			expect(() => readDesignPlan(rest)).toThrow(new RegExp(`^${key} is missing`));
		}
	});
});

const plan = monitoring.examples[1]!;
test.each<[unknown, RegExp]>([
	[null, /^The plan must be an object/],
	[[], /^The plan must be an object/],
	[{ ...plan, alfa: 0.05 }, /^alfa is not known here/],
	[{ ...plan, alpha: '0.05' }, /^alpha must be a number above 0 and below 1, not "0.05"/],
	[{ ...plan, sides: 3 }, /^sides must be one of 1, 2, not 3/],
	[{ ...plan, informationFractions: [0.5, 'x', 1] }, /^informationFractions\[1\] must be/],
	[{ ...plan, informationFractions: 0.5 }, /^informationFractions must be a list/],
	[{ ...plan, efficacy: { kind: 'pocock', delta: 1 } }, /^efficacy\.delta is not known/],
	[{ ...plan, observed: { look: 6, z: 1 } }, /^observed\.look must be .* at most 5/],
	[{ ...plan, observed: { look: 1.5, z: 1 } }, /^observed\.look must be a whole number/],
	[{ ...plan, observed: { look: 1 } }, /^observed\.z is missing/],
	[{ ...plan, power: null }, /^power must be/],
	[{ ...plan, futility: { kind: 'spending-pocock', beta: 0.2 } }, /one-sided/]
])('the monitoring plan %j is refused', (written, sentence) => {
	expect(() => readMonitoringPlan(written)).toThrow(sentence);
});

test('with futility, power may be left out and is 1 − beta', () => {
	const { power: _, ...rest } = monitoring.examples[0]!;
	expect(readMonitoringPlan(rest).power).toBeCloseTo(0.9, 12);
});

const [slope, visit, mean] = design.examples as [Plan, Plan, Plan];
test.each<[unknown, RegExp]>([
	[7, /^The plan must be an object/],
	[{ ...slope, question: 'survival' }, /^question must be one of slope-difference/],
	[{ ...slope, subjects: 40 }, /^power or subjects must be given, and not both/],
	[{ ...mean, times: [0, 1] }, /^times is not known here/],
	[{ ...slope, variances: undefined }, /^variances must be an object/],
	[{ ...slope, variances: { residual: -1 } }, /^variances\.residual must be a number above 0/],
	[{ ...slope, dropout: [0, 0.1] }, /each of the 5 visits/],
	[{ ...slope, dropout: { arm0: [0, 0, 0, 0, 0] } }, /^dropout\.arm1 is missing/],
	[{ ...slope, dropout: [0, 0, 0, 0, 1] }, /^dropout\[4\] must be/],
	[{ ...slope, mean: 'categorical' }, /straight line/],
	[{ ...visit, time: 5 }, /must be one of 0, 3, 12/],
	[{ ...visit, commonBaseline: 'yes' }, /^commonBaseline must be true or false/],
	[{ ...slope, looks: { informationFractions: [0.5], efficacy: { kind: 'pocock' } } }, /must be 1/],
	[{ ...slope, looks: { informationFractions: [1] } }, /^looks\.efficacy is missing/],
	[{ ...slope, simulation: { replicates: 10 } }, /^simulation\.seed is missing/],
	[
		{ ...slope, simulation: { replicates: 1.5, seed: 1 } },
		/^simulation\.replicates must be a whole/
	]
])('the design plan %j is refused', (written, sentence) => {
	expect(() => readDesignPlan(written)).toThrow(sentence);
});

test('subjects may be a total, split by the allocation', () => {
	const { power: _, ...rest } = slope;
	const read = readDesignPlan({ ...rest, subjects: 90, allocation: 2 / 3 });
	expect(read.wanted).toEqual({ subjects: [30, 60] });
});
