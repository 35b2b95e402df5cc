import { UcumLhcUtils } from '@lhncbc/ucum-lhc';
import { describe, expect, it } from 'vitest';
import { analytes, convert, converts } from './convert';
import { quantityOf, unitCodes, type UnitCode } from './units';

/** The units of the house against a general-purpose UCUM implementation (Lister Hill Center, National Library of Medicine). */
const ucum = UcumLhcUtils.getInstance();
const theirs = (value: number, from: UnitCode, to: UnitCode): number | null => {
	const answer = ucum.convertUnitTo(from, value, to);
	return answer.status === 'succeeded' ? answer.toVal : null;
};
const pairs = unitCodes.flatMap((from) =>
	unitCodes.filter((to) => to !== from).map((to) => [from, to] as const)
);
const agree = (ours: number, other: number | null) =>
	other !== null && Math.abs(ours - other) <= 1e-9 * Math.max(1, Math.abs(other));

describe('against UCUM, pair by pair', () => {
	it('each code is a valid unit there', () => {
		for (const code of unitCodes) expect(ucum.validateUnitString(code).status, code).toBe('valid');
	});

	it('what converts here converts there to the same number', () => {
		const same = pairs.filter(([from, to]) => converts(from, to));
		expect(same.length).toBeGreaterThanOrEqual(80);
		const wrong = same.flatMap(([from, to]) =>
			[7, -3.25, 0, 1e4].flatMap((value) => {
				const [ours, other] = [convert(value, from, to), theirs(value, from, to)];
				return agree(ours, other) ? [] : [`${value} ${from} → ${to}: ${ours}, ${other}`];
			})
		);
		expect(wrong).toEqual([]);
	});

	it('what converts there and not here is kept apart on purpose', () => {
		const apart = new Set(
			pairs
				.filter(([from, to]) => !converts(from, to) && theirs(7, from, to) !== null)
				.map(([from, to]) => [quantityOf(from), quantityOf(to)].sort().join(' and '))
		);
		expect([...apart].sort()).toEqual([
			// A month of the calendar has no fixed number of days.
			'calendar time and time',
			// Annotations are of dimension one to UCUM; points are no share and no count.
			'count and ratio',
			'count and score',
			// The annotation says per body surface: another quantity, though the same dimension.
			'filtration rate and volume rate',
			'ratio and score'
		]);
	});

	it.each([
		['glucose', 180.16, 'mmol/L'],
		['creatinine', 113.12, 'umol/L']
	] as const)(
		'mass to moles of %s agrees with its molar mass to the factor’s digits',
		(analyte, mass, to) => {
			const answer = ucum.convertUnitTo('mg/dL', 1, to, { molecularWeight: mass });
			const ours = convert(1, 'mg/dL', to, analyte);
			expect(Math.abs(ours / Number(answer.toVal) - 1)).toBeLessThan(1e-4);
			expect(analytes[analyte].note).toContain(String(mass));
		}
	);
});
