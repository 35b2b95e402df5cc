import { readFileSync } from 'node:fs';
import type { ModelDesign } from '../design/model-design.js';

/** For tests only: the data sets of this folder as the likelihood sees them, without the plan in between. */

export type ReferenceSet = 'orthodont' | 'sleepstudy' | 'btheb' | 'ovary' | 'penicillin';

const sources = new Map<string, Record<string, string>[]>();

export function readRows(set: ReferenceSet): Record<string, string>[] {
	let rows = sources.get(set);
	if (!rows) {
		const text = readFileSync(new URL(`./${set}.csv`, import.meta.url), 'utf8');
		const [header = '', ...lines] = text.trim().split('\n');
		const columns = header.split(',');
		rows = lines.map((line) => {
			const cells = line.split(',');
			return Object.fromEntries(columns.map((c, i) => [c, cells[i]!]));
		});
		sources.set(set, rows);
	}
	return rows;
}

/** One coefficient as the sources name it: `(Intercept)`, `time`, `visitf2:arm`, a column of the file. */
function valueOf(term: string, row: Record<string, string>): number {
	return term.split(':').reduce((value, part) => {
		if (part === '(Intercept)') return value;
		const visit = /^visitf(\d+)$/.exec(part);
		if (visit) return value * (row.visit === visit[1] ? 1 : 0);
		return value * Number(row[part]);
	}, 1);
}

/** The rows of a set with the coefficients `names`, in that order. */
export function referenceDesign(set: ReferenceSet, names: readonly string[]): ModelDesign {
	const all = readRows(set);
	const labels = [...new Set(all.map((r) => r.subject!))];
	const order = labels.flatMap((label) =>
		all
			.map((row, i) => ({ row, i }))
			.filter(({ row }) => row.subject === label)
			.sort(
				(a, b) =>
					Number(a.row.time) - Number(b.row.time) || Number(a.row.visit) - Number(b.row.visit)
			)
	);
	const n = order.length;
	const p = names.length;
	const x = new Float64Array(n * p);
	names.forEach((name, j) => order.forEach(({ row }, i) => (x[j * n + i] = valueOf(name, row))));
	const visits = [...new Set(all.map((r) => Number(r.visit)))].sort((a, b) => a - b).map(String);
	const start = new Int32Array(labels.length + 1);
	labels.forEach((label, s) => {
		start[s + 1] = start[s]! + order.filter(({ row }) => row.subject === label).length;
	});
	const arms = [...new Set(all.flatMap((r) => (r.arm === undefined ? [] : [r.arm])))].sort();
	return {
		n,
		p,
		x,
		y: Float64Array.from(order, ({ row }) => Number(row.y)),
		names: [...names],
		time: Float64Array.from(order, ({ row }) => Number(row.time)),
		visit: Int32Array.from(order, ({ row }) => visits.indexOf(row.visit!)),
		visits,
		subjectStart: start,
		subjects: labels,
		subjectGroup: Int32Array.from(labels, (label) =>
			Math.max(0, arms.indexOf(all.find((r) => r.subject === label)!.arm ?? ''))
		),
		groups: arms,
		rowOf: Int32Array.from(order, ({ i }) => i),
		timeInMean: names.some((name) => name.startsWith('visitf')) ? 'categorical' : 'linear',
		aliased: []
	};
}

/** The first so many subjects of a design: small enough for matrices over all rows. */
export function firstSubjects(design: ModelDesign, subjects: number): ModelDesign {
	const n = design.subjectStart[subjects]!;
	const x = new Float64Array(n * design.p);
	for (let j = 0; j < design.p; j++)
		for (let i = 0; i < n; i++) x[j * n + i] = design.x[j * design.n + i]!;
	return {
		...design,
		n,
		x,
		y: design.y.slice(0, n),
		time: design.time.slice(0, n),
		visit: design.visit.slice(0, n),
		subjectStart: design.subjectStart.slice(0, subjects + 1),
		subjects: design.subjects.slice(0, subjects),
		subjectGroup: design.subjectGroup.slice(0, subjects),
		rowOf: design.rowOf.slice(0, n)
	};
}
