import { describe, expect, test } from 'vitest';
import { byArm, fingerprint, growthResult, lookInput } from '../../../tests/unit/pdf-fixture';
import { lookReport } from './look-report';
import { reportText, type ReportNode, type ReportTree, type TableNode } from './tree';
import { ReportFault, type LookReportInput } from './input';

const tables = (tree: ReportTree): TableNode[] => tree.body.filter((n) => n.kind === 'table');
const table = (tree: ReportTree, caption: string): TableNode => {
	const found = tables(tree).find((t) => t.caption.startsWith(caption));
	if (!found) throw new Error(`no table ${caption}`);
	return found;
};
const said = (tree: ReportTree): string => reportText(tree).join('\n');
const heads = (tree: ReportTree): string[] =>
	tree.body.filter((n: ReportNode) => n.kind === 'heading').map((n) => n.text);

function fault(input: LookReportInput): string {
	try {
		lookReport(input);
	} catch (error) {
		if (error instanceof ReportFault) return error.code;
		throw error;
	}
	return 'none';
}

describe('a look as a report', () => {
	const tree = lookReport(lookInput());

	test('says what was asked, how, on whom, and what came out', () => {
		expect(heads(tree)).toEqual([
			'What was asked',
			'The model',
			'People and measurements',
			'What is missing',
			'Estimates',
			'How alike the measurements of one subject are',
			'How well the model fits',
			'Figures',
			'Where this comes from'
		]);
		expect(said(tree)).toContain('Does the yearly change in height differ between girls and boys?');
		expect(said(tree)).toContain('107 measurements of 27 subjects');
		expect(said(tree)).toContain('missing at random');
		expect(said(tree)).toContain('No estimand was stated');
		expect(said(tree)).toContain('Kenward–Roger');
	});

	test('prints each estimate with its unit, standard error, interval, df, t and p', () => {
		expect(table(tree, 'What the model says').rows).toEqual([
			[
				'Change per year, boy (mm per year)',
				'0.7844',
				'0.0775',
				'0.6301 to 0.9386',
				'79.0',
				'10.12',
				'<0.0001'
			],
			[
				'Change per year, girl (mm per year)',
				'0.4795',
				'0.0935',
				'0.2935 to 0.6656',
				'79.0',
				'5.13',
				'<0.0001'
			],
			[
				'Difference in change per year, girl minus boy (mm per year)',
				'−0.305',
				'0.121',
				'−0.547 to −0.063',
				'79.0',
				'−2.51',
				'0.0141'
			],
			[
				'Difference at age 14 years, girl minus boy (mm)',
				'−3.236',
				'0.918',
				'−5.085 to −1.386',
				'45.2',
				'−3.52',
				'0.0010'
			]
		]);
		expect(table(tree, 'All terms').rows.map((r) => r[0])).toEqual([
			'Level at age 0 years, boy (mm)',
			'Change per year, boy (mm per year)',
			'Difference in level at age 0 years, girl minus boy (mm)',
			'Difference in change per year, girl minus boy (mm per year)'
		]);
	});

	test('says how alike measurements are and what that is worth', () => {
		expect(table(tree, 'Variance components').rows).toEqual([
			['Between subjects: lasting level', '3.299', '1.736 to 6.218', '1.816'],
			['Within subjects: left over', '1.922', '1.422 to 2.671', '1.386']
		]);
		expect(said(tree)).toContain(
			'correlate 0.632 (intra-class correlation, 95% interval 0.452 to 0.779)'
		);
		expect(said(tree)).toContain(
			'107 measurements carry about as much information as 37 independent ones'
		);
	});

	test('draws the subjects with a line for each group, and the residuals', () => {
		const figures = tree.body.filter((n) => n.kind === 'figure');
		expect(figures.map((f) => f.chart.type)).toEqual(['trajectory', 'residual']);
		const [first, second] = figures.map((f) => f.chart);
		if (first?.type !== 'trajectory' || second?.type !== 'residual') throw new Error('order');
		expect(first.data.lines.map((l) => l.label)).toEqual(['boy', 'girl']);
		expect(first.data.subjects).toHaveLength(27);
		expect(second.data.points).toHaveLength(108);
		expect(figures[0]!.alt).toContain('Fitted line girl');
	});

	test('a single group has one line and no group table', () => {
		const pooled = lookReport(lookInput({ group: undefined, result: growthResult([]) }));
		expect(tables(pooled).map((t) => t.caption)).not.toContain('Who is in each group');
		expect(table(pooled, 'What the model says').rows.map((r) => r[0])).toEqual([
			'Change per year (mm per year)'
		]);
		expect(said(pooled)).not.toContain('minus');
	});

	test('a covariate is called by its label, with the level it is compared to', () => {
		const result = growthResult();
		const numbers = result.coefficients[1]!;
		const sited = lookReport(
			lookInput({
				covariates: { bmi: { label: 'Body mass index', unit: 'kg/m²' } },
				result: {
					...result,
					model: {
						...result.model,
						covariates: [
							{ name: 'bmi', kind: 'numeric', levels: [] },
							{ name: 'site', kind: 'categorical', levels: ['Northmoor', 'Saltreach'] }
						]
					},
					coefficients: [
						...result.coefficients,
						{ ...numbers, name: 'bmi' },
						{ ...numbers, name: 'site[Saltreach]' }
					]
				}
			})
		);
		expect(table(sited, 'All terms').rows.map((r) => r[0])).toEqual(
			expect.arrayContaining([
				'Level at age 0 years, boy, covariates at zero or reference (mm)',
				'For one more of Body mass index (mm per kg/m²)',
				'site: Saltreach minus Northmoor (mm)'
			])
		);
	});

	test('carries the caution of a research record always, of a closed report only there', () => {
		const titles = (t: ReportTree) => t.cover.cautions.map((c) => c.title);
		expect(titles(tree)).toContain('Research record only');
		expect(titles(tree)).not.toContain('Confidential to the board and the unmasked group');
		expect(titles(lookReport(byArm()))).toEqual(
			expect.arrayContaining([
				'Research record only',
				'Confidential to the board and the unmasked group'
			])
		);
		expect(
			titles(lookReport(lookInput({ measure: { name: 'eGFR', unit: 'mL/min', derived: true } })))
		).toContain('Computed values');
	});

	test('is the same for the same input', () => {
		expect(lookReport(lookInput())).toEqual(tree);
	});
});

describe('a closed report by arm', () => {
	test('shows letters in the order of the alphabet, never the arms behind them', () => {
		const tree = lookReport(byArm());
		expect(table(tree, 'Who is in each group').rows.map((r) => r[0])).toEqual(['Arm A', 'Arm B']);
		expect(table(tree, 'What the model says').rows.map((r) => r[0])).toEqual([
			'Change per year, Arm A (mm per year)',
			'Change per year, Arm B (mm per year)',
			'Difference in change per year, Arm A minus Arm B (mm per year)',
			'Difference at age 14 years, Arm A minus Arm B (mm)'
		]);
		expect(JSON.stringify(tree)).not.toMatch(/placebo|venatrol/i);
		// B is the reference here: its slope is the one of the first level, not of the first letter.
		expect(table(tree, 'What the model says').rows[1]![1]).toBe('0.7844');
	});

	test('each arm needs a letter of its own', () => {
		const letters = (l: Record<string, string>) =>
			fault(byArm({ group: { kind: 'arm', letters: l } }));
		expect(letters({ Placebo: 'A' })).toBe('ARM_WITHOUT_LETTER');
		expect(letters({ Placebo: 'A', Venatrol: 'A' })).toBe('ARM_WITHOUT_LETTER');
		expect(letters({ Placebo: 'A', Venatrol: 'drug' })).toBe('ARM_WITHOUT_LETTER');
		expect(fault(byArm({ group: { kind: 'arm' }, result: growthResult(['A', 'B']) }))).toBe('none');
	});

	test('an arm named in free words stops the report', () => {
		expect(fault(byArm({ modelWords: 'Compare venatrol with the rest.' }))).toBe('ARM_NAME_SHOWN');
		expect(fault(byArm({ estimand: 'The effect of Placebo.' }))).toBe('ARM_NAME_SHOWN');
		expect(fault(byArm({ modelWords: 'Compare the placebos.' }))).toBe('none');
	});

	test('an open report may not compare arms', () => {
		expect(fault(byArm({ kind: 'open' }))).toBe('ARMS_IN_OPEN_REPORT');
		expect(fault(lookInput({ group: undefined }))).toBe('GROUP_UNEXPLAINED');
	});

	test('a fit that is not the plan’s says so on the cover and on every page', () => {
		const look = { number: 2, planned: false, question: 'Does the change differ?' };
		const tree = lookReport(byArm({ look }));
		expect(tree.everyPage.banners).toEqual([expect.stringMatching(/^NOT PLANNED/)]);
		expect(tree.cover.cautions[0]).toMatchObject({ tone: 'warning', title: 'Not planned' });
		expect(lookReport(byArm()).everyPage.banners).toEqual([]);
		expect(lookReport(lookInput({ look })).everyPage.banners).toEqual([]);
	});
});

describe('what must not pass in silence', () => {
	test('R-79: a fit that did not converge is said on the cover, on every page and at its numbers', () => {
		const tree = lookReport(lookInput({ result: { ...growthResult(), converged: false } }));
		expect(tree.everyPage.banners).toEqual([expect.stringMatching(/^DID NOT CONVERGE/)]);
		expect(tree.cover.cautions[0]).toMatchObject({ title: 'The fit did not converge' });
		for (const caption of ['What the model says', 'All terms']) {
			expect(table(tree, caption).caption).toContain('did not converge');
		}
		expect(said(tree)).toContain('NO, 8 iterations');
	});

	test('a between-subject variance at zero is said', () => {
		const tree = lookReport(lookInput({ result: { ...growthResult(), boundary: true } }));
		expect(said(tree)).toContain('estimated as exactly zero');
		expect(said(lookReport(lookInput()))).not.toContain('estimated as exactly zero');
	});

	test('the engine’s own notes about rows left out are printed', () => {
		expect(said(lookReport(lookInput()))).toContain('1 row without an outcome was left out.');
	});

	const whole = lookInput();
	test.each([
		['cut.id', { cut: { ...whole.cut, id: '' } }],
		['modelWords', { modelWords: ' ' }],
		...(['engineVersion', 'appVersion', 'inputHash', 'madeAt', 'madeBy', 'seed'] as const).map(
			(key) =>
				[
					`provenance.${key}`,
					{ provenance: { ...whole.provenance, [key]: undefined } as never }
				] as const
		),
		['provenance.softwareVersions', { provenance: { ...whole.provenance, softwareVersions: {} } }],
		[
			'provenance.softwareVersions.node',
			{ provenance: { ...whole.provenance, softwareVersions: { node: '' } } }
		]
	] as [string, Partial<LookReportInput>][])(
		'R-74: without %s there is no report',
		(name, change) => {
			expect(fault(lookInput(change))).toBe('PROVENANCE_MISSING');
			expect(() => lookReport(lookInput(change))).toThrow(name);
		}
	);

	test('R-74: cut id, code version, model, seed, software versions and time are printed', () => {
		const rows = Object.fromEntries(table(lookReport(lookInput()), 'Provenance').rows);
		expect(rows).toMatchObject({
			Cut: 'Cut 1, 0199c0de-0000-7000-8000-000000000001',
			'Code version': 'Heddle 0.1.0, statistics engine 1.0.0',
			Model: whole.modelWords,
			Seed: 'none: nothing in this analysis is drawn at random',
			Software: 'node 20.20.0, ml-matrix 6.15.1, jstat 1.9.6',
			Made: '1 June 2026, 07:00 UTC by Ada Fenwick'
		});
		const seeded = lookInput({ provenance: { ...whole.provenance, seed: 20260601 } });
		expect(Object.fromEntries(table(lookReport(seeded), 'Provenance').rows).Seed).toBe('20260601');
	});

	test('a malformed fingerprint and another engine’s result are refused', () => {
		expect(fault(lookInput({ cut: { ...whole.cut, fingerprint: fingerprint.slice(1) } }))).toBe(
			'FINGERPRINT_MALFORMED'
		);
		expect(fault(lookInput({ result: { ...growthResult(), engineVersion: '0.9.0' } }))).toBe(
			'ENGINE_MISMATCH'
		);
	});
});
