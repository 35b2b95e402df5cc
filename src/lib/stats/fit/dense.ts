import { CholeskyDecomposition, Matrix } from 'ml-matrix';
import type { Design } from '../design/design.js';
import type { Method } from '../types.js';

/**
 * For tests only: −2 log-likelihood with V (n × n) written out in full, sharing no step with the engine.
 *
 * V = subject · 1(same subject) + residual · 1(same row); definitions as in reference/README.md.
 */
export function denseDeviance(
	design: Design,
	method: Method,
	subject: number,
	residual: number
): number {
	const { n, p } = design;
	const v = new Matrix(n, n);
	for (let i = 0; i < n; i++)
		for (let j = 0; j < n; j++)
			v.set(
				i,
				j,
				(design.subject[i] === design.subject[j] ? subject : 0) + (i === j ? residual : 0)
			);
	const x = new Matrix(n, p);
	for (let i = 0; i < n; i++) for (let j = 0; j < p; j++) x.set(i, j, design.x[j * n + i]!);
	const y = Matrix.columnVector(design.y);
	const logDet = (c: CholeskyDecomposition) =>
		c.lowerTriangularMatrix.diagonal().reduce((sum, d) => sum + 2 * Math.log(d), 0);
	const cv = new CholeskyDecomposition(v);
	const vx = cv.solve(x);
	const information = x.transpose().mmul(vx);
	const symmetric = information.clone().add(information.transpose()).div(2);
	const ci = new CholeskyDecomposition(symmetric);
	const beta = ci.solve(vx.transpose().mmul(y));
	const r = y.clone().sub(x.mmul(beta));
	const squares = r.transpose().mmul(cv.solve(r)).get(0, 0);
	const log2Pi = Math.log(2 * Math.PI);
	return method === 'ML'
		? n * log2Pi + logDet(cv) + squares
		: (n - p) * log2Pi + logDet(cv) + logDet(ci) + squares;
}
