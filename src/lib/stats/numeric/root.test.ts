import { expect, test } from 'vitest';
import { monotoneRoot } from './root.js';

test.each([
	['rising', (x: number) => Math.exp(x) - 5, 0, 10, Math.log(5)],
	['falling', (x: number) => 2 - x ** 3, -5, 40, Math.cbrt(2)],
	['flat on one side', (x: number) => Math.atan(50 * (x - 0.3)), -10, 20, 0.3],
	['at an end', (x: number) => x - 1, 1, 4, 1]
])('the root of a function that is %s', (_, f, from, to, root) => {
	expect(Math.abs(monotoneRoot(f, from, to) - root)).toBeLessThan(1e-11);
	expect(Math.abs(monotoneRoot(f, to, from) - root)).toBeLessThan(1e-11);
});

test('a smooth root takes few evaluations, a nasty one an end', () => {
	let evaluations = 0;
	monotoneRoot((x) => (evaluations++, Math.log(x) - 1), 1, 6);
	expect(evaluations).toBeLessThan(15);
	evaluations = 0;
	const jump = monotoneRoot((x) => (evaluations++, x < Math.PI ? -1 : 1), 0, 1e6);
	expect(Math.abs(jump - Math.PI)).toBeLessThan(1e-9);
	expect(evaluations).toBeLessThan(210);
});

test('ends on one side of zero are a fault of the caller', () => {
	expect(() => monotoneRoot((x) => x, 1, 2)).toThrow(RangeError);
});
