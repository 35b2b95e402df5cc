import { Matrix } from 'ml-matrix';
import type { CrossProducts, SizeClass } from './cross-products.js';

/** `scale` · within + Σ over sizes of `weight(class)` · between; (p + 1) × (p + 1). */
export function weighted(
	products: CrossProducts,
	scale: number,
	weight: (c: SizeClass) => number
): Matrix {
	const total = Matrix.mul(products.within, scale);
	for (const c of products.classes) {
		const w = weight(c);
		for (let i = 0; i < total.rows; i++)
			for (let j = 0; j < total.columns; j++)
				total.set(i, j, total.get(i, j) + w * c.between.get(i, j));
	}
	return total;
}

/** Σ over sizes of subjects · `term(class)`. */
export function sumOverSubjects(products: CrossProducts, term: (c: SizeClass) => number): number {
	return products.classes.reduce((sum, c) => sum + c.subjects * term(c), 0);
}

/** The p × p part of an augmented matrix: what belongs to X. */
export function meanPart(augmented: Matrix): Matrix {
	return augmented.subMatrix(0, augmented.rows - 2, 0, augmented.columns - 2);
}
