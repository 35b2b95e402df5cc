import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { randomStream } from '../numeric/random.js';
import { rankOf } from './rank.js';

const n = 40;
/** A first column of ones, then the given ones. */
const matrix = (...columns: ((i: number) => number)[]) =>
	Float64Array.from({ length: n * (columns.length + 1) }, (_, at) => {
		const j = Math.floor(at / n);
		return j === 0 ? 1 : columns[j - 1]!(at % n);
	});
const normals = (seed: number) => {
	const random = randomStream(seed);
	const values = Array.from({ length: n }, () => random.normal());
	return (i: number) => values[i]!;
};
const [a, b, c] = [normals(1), normals(2), normals(3)] as const;

describe('the rank of a design', () => {
	test.each<[string, Float64Array, number[], [number, number[]][]]>([
		['apart', matrix(a, b, c), [0, 1, 2, 3], []],
		[
			'a combination, up to rounding',
			matrix(a, b, (i) => 0.1 * a(i) - 0.3 * b(i)),
			[0, 1, 2],
			[[3, [1, 2]]]
		],
		['a constant', matrix(a, () => 7.3, b), [0, 1, 3], [[2, [0]]]],
		['nothing but zeros', matrix(a, () => 0), [0, 1], [[2, []]]],
		[
			'the same twice, and twice that',
			matrix(a, a, (i) => 2 * a(i)),
			[0, 1],
			[
				[2, [1]],
				[3, [1]]
			]
		],
		['from a far origin', matrix((i) => 1.7e12 + 1e9 * a(i), b), [0, 1, 2], []],
		[
			'from a far origin and its like in another unit',
			matrix(
				(i) => 1.7e9 + 1e6 * a(i),
				(i) => (1.7e9 + 1e6 * a(i)) * 1000
			),
			[0, 1],
			[[2, [1]]]
		],
		['close to another, but apart', matrix(a, (i) => a(i) + 1e-6 * b(i)), [0, 1, 2], []],
		[
			'on wildly different scales',
			matrix(
				(i) => 1e150 * a(i),
				(i) => 1e-150 * b(i)
			),
			[0, 1, 2],
			[]
		]
	])('%s', (_, x, kept, aliased) => {
		const rank = rankOf(x, n, x.length / n);
		expect(rank.kept).toEqual(kept);
		expect(rank.aliased.map(({ column, of }) => [column, of.map((o) => o.column)])).toEqual(
			aliased
		);
	});

	test('the weights of an aliased column give it back', () => {
		fc.assert(
			fc.property(
				fc.array(fc.integer({ min: -20, max: 20 }), { minLength: 3, maxLength: 3 }),
				fc.constantFrom(1e-6, 1, 1e6),
				([u = 0, v = 0, w = 0], unit) => {
					const planted = (i: number) => unit * (u + v * a(i) + (w / 7) * b(i));
					const x = matrix(a, b, planted, c);
					const { kept, aliased } = rankOf(x, n, 5);
					expect(kept).toEqual([0, 1, 2, 4]);
					expect(aliased[0]!.column).toBe(3);
					const size = unit * (Math.abs(u) + Math.abs(v) + Math.abs(w));
					for (let i = 0; i < n; i++) {
						const back = aliased[0]!.of.reduce(
							(sum, o) => sum + o.weight * x[o.column * n + i]!,
							0
						);
						expect(Math.abs(back - planted(i))).toBeLessThanOrEqual(1e-7 * size);
					}
				}
			),
			{ numRuns: 100, seed: 41 }
		);
	});

	test('more columns than rows leaves no more than rows', () => {
		const short = Float64Array.from([1, 1, 0, 1, 2, 5]);
		expect(rankOf(short, 2, 3).kept).toEqual([0, 1]);
	});
});
