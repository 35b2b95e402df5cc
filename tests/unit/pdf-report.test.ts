import { execFileSync } from 'node:child_process';
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { groupedHex, lookReport, type LookReportInput, type TableNode } from '$lib/report';
import { columnWidths } from '$lib/server/pdf/table';
import { renderReport } from '$lib/server/pdf/render';
import { byArm, fingerprint, flowHeld, growthResult, lookInput } from './pdf-fixture';

const createdAt = new Date('2026-06-01T07:00:00Z');
let folder: string;
beforeAll(() => {
	folder = mkdtempSync(join(tmpdir(), 'heddle-pdf-'));
});
afterAll(() => rmSync(folder, { recursive: true }));

let made = 0;
/** A report on disk, and what independent programs say about it. */
async function printed(input: LookReportInput) {
	const tree = lookReport(input);
	const bytes = await renderReport(tree, { createdAt });
	const path = join(folder, `${made++}.pdf`);
	writeFileSync(path, bytes);
	const run = (program: string, ...args: string[]) =>
		execFileSync(program, args, { encoding: 'utf8', maxBuffer: 64e6 });
	const pages = run('pdftotext', '-layout', path, '-').split('\f').slice(0, -1);
	return { tree, bytes, path, pages, run };
}

const flat = (text: string) => text.replace(/\s+/g, ' ');
const escaped = (text: string) => text.replace(/[.*+?^${}()|[\]\\]/g, '\\$&');

interface Box {
	page: number;
	word: string;
	xMin: number;
	xMax: number;
	yMin: number;
	yMax: number;
}
function boxes(xml: string): Box[] {
	return xml
		.split('<page ')
		.slice(1)
		.flatMap((page, i) =>
			[
				...page.matchAll(
					/<word xMin="([\d.-]+)" yMin="([\d.-]+)" xMax="([\d.-]+)" yMax="([\d.-]+)">([^<]*)</g
				)
			].map((m) => ({
				page: i + 1,
				word: m[5]!,
				xMin: Number(m[1]),
				yMin: Number(m[2]),
				xMax: Number(m[3]),
				yMax: Number(m[4])
			}))
		);
}

describe('a report as PDF, read by other programs', () => {
	let open: Awaited<ReturnType<typeof printed>>;
	beforeAll(async () => {
		open = await printed(lookInput());
	});

	test('pdftotext finds every number of every table, a row in a line', () => {
		const all = open.pages.join('\n');
		const tables = open.tree.body.filter((n): n is TableNode => n.kind === 'table');
		let rows = 0;
		for (const table of tables.filter((t) => t.columns.some((c) => c.numeric))) {
			for (const row of table.rows) {
				const numbers = row.filter((_, i) => table.columns[i]!.numeric);
				expect(all).toMatch(new RegExp(numbers.map(escaped).join('\\s+')));
				rows++;
			}
		}
		expect(rows).toBe(12);
		expect(all).toMatch(/−0\.305\s+0\.121\s+−0\.547 to −0\.063\s+79\.0\s+−2\.51\s+0\.0141/);
	});

	test('each page says which it is and carries the fingerprint of the cut', () => {
		expect(open.pages.length).toBeGreaterThan(2);
		open.pages.forEach((page, i) => {
			expect(page).toContain(`page ${i + 1} of ${open.pages.length}`);
			expect(page).toContain(`Cut ${groupedHex(fingerprint)}`);
		});
	});

	test('it is tagged, titled, in English, and its faces are embedded', () => {
		const info = open.run('pdfinfo', open.path);
		expect(info).toMatch(/^Tagged:\s+yes$/m);
		expect(info).toMatch(/^Title:\s+LGC-2: look 1, open report$/m);
		expect(info).toMatch(/^CreationDate:\s+Mon Jun {2}1 /m);
		const catalog = open.run('qpdf', '--json', '--json-key=qpdf', open.path);
		expect(catalog).toContain('"/Lang": "u:en-GB"');
		expect(catalog).toContain('"/DisplayDocTitle": true');
		const fonts = open.run('pdffonts', open.path).trim().split('\n').slice(2);
		expect(fonts.length).toBeGreaterThanOrEqual(2);
		for (const font of fonts) expect(font).toMatch(/AtkinsonHyperlegible\S*\s.*\byes yes yes\b/);
	});

	test('qpdf finds nothing wrong with it', () => {
		expect(open.run('qpdf', '--check', open.path)).toContain('No syntax or stream encoding errors');
	});

	test('its structure is headings, paragraphs, tables with heads, figures with words', () => {
		const structure = open.run('pdfinfo', '-struct', open.path);
		const how = (tag: string) => structure.match(new RegExp(`^ *${tag}\\b`, 'gm'))?.length ?? 0;
		expect(how('H1')).toBe(1);
		expect(how('H2')).toBe(
			open.tree.body.filter((n) => n.kind === 'heading' && n.level === 1).length
		);
		expect(how('H3')).toBe(2);
		expect(how('Table')).toBe(5);
		const tables = open.tree.body.filter((n) => n.kind === 'table');
		const cells = tables.reduce((sum, t) => sum + t.rows.length * (t.columns.length - 1), 0);
		expect(how('TD')).toBe(cells);
		expect(how('TH')).toBe(tables.reduce((sum, t) => sum + t.columns.length + t.rows.length, 0));
		expect(how('Figure')).toBe(2);
		const raw = open.run('qpdf', '--json', '--json-key=qpdf', open.path);
		const alts = [...raw.matchAll(/"\/Alt": "u:([^"]*)"/g)].map((m) => m[1]);
		expect(alts).toEqual(
			expect.arrayContaining([
				expect.stringContaining('Fitted line girl'),
				expect.stringContaining('Conditional residual')
			])
		);
	});

	test('bookmarks lead to the sections', () => {
		const { outlines } = JSON.parse(open.run('qpdf', '--json', '--json-key=outlines', open.path));
		expect(outlines.map((o: { title: string }) => o.title)).toEqual([
			'Look 1',
			...open.tree.body.flatMap((n) => (n.kind === 'heading' && n.level === 1 ? [n.text] : []))
		]);
		expect(outlines[1].kids.map((o: { title: string }) => o.title)).toEqual(['The model']);
		const at = (title: string) =>
			outlines.find((o: { title: string }) => o.title === title).destpageposfrom1;
		expect(open.pages[at('Estimates') - 1]).toMatch(/^\s*Estimates$/m);
	});

	test('figures are drawn into it: labels at line ends and axes with units', () => {
		const page = open.pages.find(
			(p) => p.includes('each subject’s') || p.includes("each subject's")
		)!;
		expect(page).toContain('Height, mm');
		expect(page).toContain('Age, years');
		expect(page).toMatch(/\bboy\b/);
		expect(page).toMatch(/\bgirl\b/);
		const words = boxes(open.run('pdftotext', '-bbox', open.path, '-'));
		const girl = words.filter((w) => w.word === 'girl').at(-1)!;
		const axis = words.find((w) => w.page === girl.page && w.word === 'years')!;
		// The x axis title ends where the axis ends; the label begins beyond it.
		expect(girl.xMin).toBeGreaterThan(axis.xMax);
	});

	test('the same tree and date give the same bytes; another date does not', async () => {
		const again = await renderReport(lookReport(lookInput()), { createdAt });
		expect(again.equals(open.bytes)).toBe(true);
		const later = await renderReport(open.tree, { createdAt: new Date('2026-06-02T07:00:00Z') });
		expect(later.equals(open.bytes)).toBe(false);
	});
});

describe('closed and released copies', () => {
	test('R-71: text, metadata and bookmarks hold no arm names', async () => {
		const { path, pages, run, bytes } = await printed(byArm());
		expect(pages.join()).toContain('Arm A minus Arm B');
		const everything = [
			pages.join('\n'),
			run('pdfinfo', path),
			run('pdfinfo', '-meta', path),
			run('pdfinfo', '-struct-text', path),
			run('qpdf', '--qdf', '--object-streams=disable', '--json', path),
			bytes.toString('latin1')
		].join('\n');
		expect(everything).not.toMatch(/placebo|venatrol/i);
	});

	test('a fit outside the plan, one that did not converge and a training study say so on each page', async () => {
		const { pages } = await printed(
			byArm({
				study: { name: 'Aldermere', code: 'AMR-01', training: true },
				look: { number: 2, planned: false, question: 'Does the change differ?' },
				result: { ...growthResult(['Placebo', 'Venatrol']), converged: false }
			})
		);
		for (const page of pages) {
			expect(page).toContain('NOT PLANNED');
			expect(page).toContain('DID NOT CONVERGE');
			expect(page).toContain('TRAINING');
		}
		expect(pages[0]).toContain('The fit did not converge');
		const plain = await printed(byArm());
		expect(plain.pages.join()).not.toMatch(/NOT PLANNED|DID NOT CONVERGE|TRAINING/);
	});

	test('a released copy says on each page whom it is for and when it was made', async () => {
		const released = { to: 'Łucja Kovačević-Őrsi', at: '2026-06-02T09:30:00Z' };
		const { pages, path, run } = await printed(byArm({ released }));
		for (const page of pages) {
			expect(page).toContain('Copy for Łucja Kovačević-Őrsi, 2 June 2026, 09:30 UTC');
		}
		expect(run('pdffonts', path).trim().split('\n').slice(2)).toHaveLength(3);
	});

	test('a name too long for its line is shortened; the time is not', async () => {
		const to = 'Maximiliana Featherstonehaugh '.repeat(8).trim();
		const { pages } = await printed(byArm({ released: { to, at: '2026-06-02T09:30:00Z' } }));
		expect(pages[1]).toMatch(/Copy for Maximiliana .*…, 2 June 2026, 09:30 UTC/);
	});
});

/** As many reasons as are listed, each as long as may be typed, and sites with long names. */
function hostileFlow(long: string) {
	const held = flowHeld();
	held.flow.excluded = Array.from({ length: 8 }, (_, at) => ({
		label: `${at} β≥ ${at % 2 ? long : 'did not come for a reason '}`.repeat(12),
		n: 1
	}));
	return { ...held, plan: held.plan.map((site) => ({ ...site, site: `${site.site} ${long} 中` })) };
}

describe('the flow of participants on paper', () => {
	test('is drawn and tagged, with the numbers in a table, and by letter in a closed report', async () => {
		const { pages, path, run, tree } = await printed(byArm({ flow: flowHeld(['Arm A', 'Arm B']) }));
		const all = flat(pages.join(' '));
		expect(all).toContain('Assessed for eligibility: 40');
		expect(all).toContain('Arm B: 12');
		expect(all).toContain('Enrolment against plan');
		expect(run('pdfinfo', '-struct', path).match(/^ *Figure\b/gm)).toHaveLength(
			tree.body.filter((node) => node.kind === 'figure').length
		);
		const raw = run('qpdf', '--json', '--json-key=qpdf', path);
		expect(raw).toContain('/Alt": "u:Assessed for eligibility: 40. Not entered: 11');
		expect(raw).toContain('/Alt": "u:By 2026-06: 27 enrolled, 48 planned.');
		expect(run('qpdf', '--check', path)).toContain('No syntax or stream encoding errors');
	});

	test('a diagram higher than a page is made smaller, and stays whole on one', async () => {
		const held = flowHeld();
		const arms = Array.from({ length: 9 }, (_, at) => ({
			...held.flow.columns[0]!,
			arm: `Arm ${'ABCDEFGHI'[at]}`
		}));
		const { pages } = await printed(
			byArm({ flow: { ...hostileFlow('a reason'), flow: { ...held.flow, columns: arms } } })
		);
		const drawn = pages.filter((page) => /From assessment to the cut-off/.test(page));
		expect(drawn).toHaveLength(1);
		expect(drawn[0]).toContain('Assessed for eligibility: 40');
		expect(drawn[0]!.match(/Completed: 3/g)).toHaveLength(9);
	});
});

describe('what people may type', () => {
	const long = 'Wolfeschlegelsteinhausenbergerdorff'.repeat(3);
	const hostile: Partial<LookReportInput> = {
		study: {
			name: `A study named ${long} ${'at great length '.repeat(12)}`,
			code: 'LONG-0000000001'
		},
		measure: { name: `Σ-index of ${long}`, unit: '10⁹/L·min⁻¹/{1.73_m2}' },
		modelWords: `β ≥ 0 → <b>bold</b> & "quoted" ${'many words in the model '.repeat(60)}`,
		group: { kind: 'characteristic', label: `cohort ${long}` },
		result: growthResult([`First ${long}`, `Second & <last> 中 ${long}`]),
		cut: { ...lookInput().cut, label: `Cut ${long}` },
		flow: hostileFlow(long),
		released: { to: long, at: '2026-06-02T09:30:00Z' }
	};

	test('nothing leaves the page, whatever its length', async () => {
		const { path, run, pages } = await printed(lookInput(hostile));
		const words = boxes(run('pdftotext', '-bbox', path, '-'));
		expect(words.length).toBeGreaterThan(500);
		for (const box of words) {
			expect(box.xMin, box.word).toBeGreaterThan(50);
			expect(box.xMax, box.word).toBeLessThan(595.28 - 50);
			expect(box.yMin, box.word).toBeGreaterThan(20);
			expect(box.yMax, box.word).toBeLessThan(841.89 - 20);
		}
		const last = (page: number) => words.filter((w) => w.page === page && w.word === 'Cut').at(-1)!;
		// The text stays above the foot of the page.
		for (let page = 1; page <= pages.length; page++) {
			const foot = last(page).yMin;
			expect(words.some((w) => w.page === page && w.yMax > foot + 2 && w.yMin < foot - 4)).toBe(
				false
			);
		}
	});

	test('characters without a glyph are spelled, never lost', async () => {
		const { pages } = await printed(lookInput(hostile));
		const all = flat(pages.join(' '));
		expect(all).toContain('beta >= 0 -> <b>bold</b> & "quoted"');
		expect(all).toContain('Sigma-index');
		expect(all).toContain('10^9/L·min^−1');
		expect(all).toContain('[U+4E2D]');
	});

	test('a table that breaks across pages shows its head on each', async () => {
		const result = growthResult();
		const one = result.coefficients[1]!;
		const covariates = Array.from({ length: 90 }, (_, i) => `covariate ${i + 1}`);
		const { pages, path, run } = await printed(
			lookInput({
				result: {
					...result,
					model: {
						...result.model,
						covariates: covariates.map((name) => ({ name, kind: 'numeric' as const, levels: [] }))
					},
					coefficients: [...result.coefficients, ...covariates.map((name) => ({ ...one, name }))]
				}
			})
		);
		const holding = pages.filter((p) => /For one more of covariate \d+ .*0\.0775/.test(p));
		expect(holding.length).toBeGreaterThan(2);
		for (const page of holding) expect(page).toMatch(/Quantity \(unit\)\s+Estimate\s+SE/);
		expect(
			flat(pages.join(' ')).match(/For one more of covariate \d+/g)!.length
		).toBeGreaterThanOrEqual(90);
		// The repeated head is not read out again.
		const heads = run('pdfinfo', '-struct-text', path).match(/"Quantity \(unit\)"/g);
		expect(heads).toHaveLength(2);
		expect(run('qpdf', '--check', path)).toContain('No syntax or stream encoding errors');
	});

	test('nothing to draw is said in the figure', async () => {
		const empty = { ...growthResult([]), trajectories: [], fittedLines: [], residuals: [] };
		const { pages } = await printed(lookInput({ group: undefined, result: empty }));
		expect(pages.join()).toContain('No measurements to draw yet.');
		expect(pages.join()).toContain('No residuals to draw yet.');
	});
});

describe('column widths', () => {
	test('always add up to the width', () => {
		const sum = (of: number[]) => of.reduce((a, b) => a + b, 0);
		const narrow = [
			{ least: 20, natural: 40 },
			{ least: 30, natural: 30 }
		];
		expect(columnWidths(narrow, 300, 0)).toEqual([270, 30]);
		const wide = [
			{ least: 100, natural: 500 },
			{ least: 100, natural: 100 }
		];
		expect(columnWidths(wide, 300, 0)).toEqual([200, 100]);
		expect(
			sum(
				columnWidths(
					[
						{ least: 400, natural: 500 },
						{ least: 200, natural: 200 }
					],
					300,
					0
				)
			)
		).toBeCloseTo(300, 9);
	});
});
