import { describe, expect, test } from 'vitest';
import { layoutOf } from '../dependence/layout.js';
import type { Dependence, ErrorStructure, SubjectEffects } from '../plan.js';
import { referenceDesign } from '../reference/reference-design.js';
import { objective } from './objective-of.js';
import { prepareModel } from './prepare-model.js';

const names = ['(Intercept)', 'baseline', 'time', 'arm', 'time:arm'];
const design = referenceDesign('btheb', names);

const effects: SubjectEffects[] = [
	'none',
	'level',
	'level-and-slope',
	'level-and-slope-uncorrelated',
	'slope'
];
const structures: ErrorStructure[] = [
	'independent',
	'serial',
	'serial-with-noise',
	'compound-symmetry',
	'toeplitz',
	'unstructured'
];
const family = structures.flatMap((structure) =>
	effects.flatMap((subjectEffects) =>
		[false, true].flatMap((visitEffects) =>
			(['none', 'visit', 'group'] as const).flatMap((varianceBy) =>
				(structure === 'serial' || structure === 'serial-with-noise'
					? (['time', 'visit'] as const)
					: (['time'] as const)
				).map((along): Dependence => ({
					subjectEffects,
					visitEffects,
					errors: { structure, along, varianceBy }
				}))
			)
		)
	)
);

/** Inside the parameter space, away from every edge, different for each entry. */
function somewhere(dependence: Dependence, shift: number): Float64Array {
	const layout = layoutOf(design, dependence);
	return Float64Array.from({ length: layout.count }, (_, i) => {
		if (dependence.errors.structure === 'unstructured' && i >= layout.shape) {
			// Diagonal entries near 1, the others small: a factor of a positive definite matrix.
			let at = layout.shape;
			for (let r = 1; r < layout.positions; r++)
				for (let c = 0; c <= r; c++)
					if (at++ === i) return r === c ? 0.9 + 0.1 * r : 0.2 + 0.05 * c;
		}
		return 0.3 + 0.35 * Math.sin(3 * i + shift) ** 2;
	});
}

describe.each(['reml', 'ml'] as const)('the analytic slope by %s', (method) => {
	test.each(family.map((d) => [describeIn(d), d] as const))('%s', (_, dependence) => {
		const f = objective(prepareModel(design, dependence), method);
		for (const shift of [1, 2]) {
			const x = somewhere(dependence, shift);
			const { value, slope } = f(x)!;
			expect(Number.isFinite(value)).toBe(true);
			x.forEach((at, i) => {
				const side = (h: number) => {
					const moved = x.slice();
					moved[i] = at + h;
					return f(moved)!.value;
				};
				// Richardson's extrapolation of central differences.
				const central = (h: number) => (side(h) - side(-h)) / (2 * h);
				const numeric = (4 * central(5e-4) - central(1e-3)) / 3;
				expect(Math.abs(slope[i]! - numeric)).toBeLessThan(1e-6 * (10 + Math.abs(numeric)));
			});
		}
	});
});

function describeIn({ subjectEffects, visitEffects, errors }: Dependence): string {
	return `${subjectEffects}, ${visitEffects ? 'visit effects, ' : ''}${errors.structure} along ${errors.along}, variance by ${errors.varianceBy}`;
}
