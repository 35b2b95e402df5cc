import { layoutOf, isMatrixStructure, type Layout } from '../dependence/layout.js';
import type { ModelDesign } from '../design/model-design.js';
import { StatsError } from '../errors.js';
import { orthonormaliseByRows } from '../numeric/orthonormal-by-rows.js';
import { orthonormalise, project, type OrthonormalBasis } from '../numeric/orthonormal.js';
import type { Dependence } from '../plan.js';
import type { Kernel } from './kernel.js';
import { gapKernel } from './kernel-gaps.js';
import { offsetKernel } from './kernel-offset.js';
import type { Sizes } from './profile.js';
import { rowsOf, visitOrder, type Rows } from './rows.js';
import { subjectLoop } from './subject-loop.js';
import { matrixWhitening } from './whiten-matrix.js';
import { recursiveWhitening } from './whiten-recursive.js';

/** A design and a dependence, ready to be fitted as often as one likes. Not for JSON: it holds functions. */
export interface PreparedModel {
	design: ModelDesign;
	/** The outcome fitted: the design's own, or another put in its place. */
	y: Float64Array;
	dependence: Dependence;
	layout: Layout;
	basis: OrthonormalBasis;
	/** Q'y. */
	leastSquares: number[];
	/** y − QQ'y. */
	residual: Float64Array;
	rows: Rows;
	sizes: Sizes;
	kernel: Kernel;
}

export function kernelFor(rows: Rows, layout: Layout, design: ModelDesign): Kernel {
	if (isMatrixStructure(layout.dependence))
		return subjectLoop(rows, layout, matrixWhitening(rows, layout, design));
	if (layout.dependence.errors.structure === 'independent' && layout.scaleClasses === 1)
		return offsetKernel(rows, layout);
	if (
		layout.dependence.errors.structure === 'serial' &&
		layout.q === 0 &&
		layout.scaleClasses === 1
	) {
		const kernel = gapKernel(rows, layout, design);
		if (kernel) return kernel;
	}
	return subjectLoop(rows, layout, recursiveWhitening(rows, layout, design));
}

/** From here on the basis is made in three passes over the rows, if its columns allow it. */
const MANY_ROWS = 2000;

function basisOf(design: ModelDesign): OrthonormalBasis {
	const { n, p } = design;
	if (n < p || p < 1) {
		throw new StatsError(
			'too-few-observations',
			`${n} usable rows cannot carry ${p} coefficients of the mean.`,
			{ observations: n, coefficients: p }
		);
	}
	const quick = n > MANY_ROWS ? orthonormaliseByRows(design.x, n, p) : null;
	if (quick) return quick;
	const found = orthonormalise(design.x, n, p);
	if ('basis' in found) return found.basis;
	const column = design.names[found.alias.column]!;
	throw new StatsError(
		'rank-deficient',
		`The column “${column}” is determined by others in the usable rows, so its coefficient cannot be estimated.`,
		{ column, determinedBy: found.alias.of.map((k) => design.names[k]!) }
	);
}

function assemble(
	design: ModelDesign,
	y: Float64Array,
	dependence: Dependence,
	layout: Layout,
	basis: OrthonormalBasis
): PreparedModel {
	const { coordinates, residual } = project(basis, y);
	const rows = rowsOf(design, layout, basis.q, residual);
	let logDeterminantOfX = 0;
	for (let j = 0; j < design.p; j++) logDeterminantOfX += 2 * Math.log(basis.r.get(j, j));
	return {
		design,
		y,
		dependence,
		layout,
		basis,
		leastSquares: coordinates,
		residual,
		rows,
		sizes: { n: design.n, p: design.p, visits: rows.visits, logDeterminantOfX },
		kernel: kernelFor(rows, layout, design)
	};
}

/**
 * What a design and a dependence come to before any parameter is known: basis of the mean, rows, kernel.
 *
 * Errors: `rank-deficient`, `too-few-observations`. Whether the model is identified is asked elsewhere.
 */
export function prepareModel(design: ModelDesign, dependence: Dependence): PreparedModel {
	return assemble(design, design.y, dependence, layoutOf(design, dependence), basisOf(design));
}

/** The same model with another outcome (n long): what a bootstrap refits. */
export function withOutcome(prepared: PreparedModel, y: Float64Array): PreparedModel {
	if (y.length !== prepared.design.n)
		throw new StatsError(
			'shape-mismatch',
			`The new outcome has ${y.length} values for ${prepared.design.n} rows.`,
			{ values: y.length, rows: prepared.design.n }
		);
	return assemble(prepared.design, y, prepared.dependence, prepared.layout, prepared.basis);
}

/**
 * About so many of the subjects, in the coordinates of the whole: where a search may begin cheaply.
 *
 * Chosen by Knuth's multiplicative hash of their position: the same each time, and in step with no alternation of arms.
 */
export function thinned(prepared: PreparedModel, subjects: number): PreparedModel {
	const { design, rows, layout } = prepared;
	const all = design.subjectStart.length - 1;
	const below = (subjects / all) * 2 ** 32;
	const chosen: number[] = [];
	for (let s = 0; s < all; s++) if (Math.imul(s + 1, 2654435761) >>> 0 < below) chosen.push(s);
	const start = new Int32Array(chosen.length + 1);
	const index: number[] = [];
	chosen.forEach((s, k) => {
		for (let i = design.subjectStart[s]!; i < design.subjectStart[s + 1]!; i++) index.push(i);
		start[k + 1] = index.length;
	});
	const n = index.length;
	const pick = (from: Float64Array, width: number) => {
		const to = new Float64Array(n * width);
		index.forEach((i, k) => to.set(from.subarray(i * width, (i + 1) * width), k * width));
		return to;
	};
	const less: ModelDesign = {
		...design,
		n,
		time: Float64Array.from(index, (i) => design.time[i]!),
		visit: Int32Array.from(index, (i) => design.visit[i]!),
		subjectStart: start,
		subjectGroup: Int32Array.from(chosen, (s) => design.subjectGroup[s]!)
	};
	const few: Rows = {
		...rows,
		n,
		a: pick(rows.a, rows.c),
		z: pick(rows.z, rows.q),
		visit: less.visit,
		subjectStart: start,
		order: visitOrder(less, layout)
	};
	return {
		...prepared,
		design: less,
		rows: few,
		sizes: { ...prepared.sizes, n },
		kernel: kernelFor(few, layout, less)
	};
}
