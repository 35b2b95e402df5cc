import { describe, expect, test } from 'vitest';
import { spell } from './spelling';

// Latin with the signs the typeface has, as a stand-in for the faces.
const has = (c: number) =>
	(c >= 0x20 && c < 0x7f) ||
	(c >= 0xa0 && c < 0x180) ||
	[0x2212, 0x2013, 0x2014, 0x2026].includes(c);

describe('characters without a glyph', () => {
	test.each([
		['plain, with − and ±', 'plain, with − and ±'],
		['σ² and β₁', 'sigma² and beta1'],
		['Δ, Ω', 'Delta, Omega'],
		['μmol/L', 'µmol/L'],
		['10⁹/L, 10⁻³, m²', '10^9/L, 10^−3, m²'],
		['x ≥ 3, y ≤ 4, ≠', 'x >= 3, y <= 4, not ='],
		['A → B ✓', 'A -> B yes'],
		['Nguyễn', 'Nguyên'],
		['e\u0301', 'é'],
		['中', '[U+4E2D]'],
		['😀', '[U+1F600]'],
		['a\u0000b\u202ec\u200bd', 'abcd'],
		['one\ntwo\tthree', 'one two three'],
		['1\u2009234', '1 234']
	])('%j is written %j', (text, spelled) => {
		const result = spell(text, has);
		expect(result).toBe(spelled);
		expect([...result].every((c) => has(c.codePointAt(0)!))).toBe(true);
	});
});
