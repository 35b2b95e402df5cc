import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import { fitsLuhn, luhnDigit, readSubjectNumber, subjectNumber } from './number';

describe('check digit', () => {
	it('is that of published examples of the Luhn formula', () => {
		// Luhn HP, US patent 2 950 048 (1960); worked examples as printed in general encyclopaedias: 7992739871 → 3, 1789372997 → 4.
		expect(luhnDigit('7992739871')).toBe(3);
		expect(luhnDigit('1789372997')).toBe(4);
		// 49927398716 is the other example in wide use; 49927398717 is its usual counter-example.
		expect(fitsLuhn('49927398716')).toBe(true);
		expect(fitsLuhn('49927398717')).toBe(false);
	});

	it('catches every single wrong digit, and every swap of neighbours but 09', () => {
		fc.assert(
			fc.property(
				fc.integer({ min: 0, max: 99 }),
				fc.integer({ min: 1, max: 9999 }),
				fc.integer({ min: 0, max: 6 }),
				fc.integer({ min: 1, max: 9 }),
				(site, running, place, step) => {
					const number = subjectNumber(String(site).padStart(2, '0'), running);
					const digits = number.replaceAll('-', '').split('');
					const wrong = [...digits];
					wrong[place] = String((Number(wrong[place]) + step) % 10);
					expect(fitsLuhn(wrong.join(''))).toBe(false);
					const [a, b] = [digits[place], digits[place + 1]];
					if (a === undefined || b === undefined || a === b) return;
					const swapped = [...digits];
					swapped[place] = b;
					swapped[place + 1] = a;
					expect(fitsLuhn(swapped.join(''))).toBe([a, b].sort().join('') === '09');
				}
			)
		);
	});
});

describe('subject numbers', () => {
	it.each(['02-0017-0', '02-0052-7', '02-0008-9', '02-0029-5', '02-0060-0', '02-0023-8'])(
		'%s is one',
		(number) => {
			const read = readSubjectNumber(number);
			expect(read).toMatchObject({ ok: true, value: { number, site: '02' } });
			expect(subjectNumber('02', Number(number.slice(3, 7)))).toBe(number);
		}
	);

	it('are read as people type them', () => {
		for (const text of [' 02-0017-0 ', '0200170', '02 0017 0', '02–0017–0'])
			expect(readSubjectNumber(text)).toEqual({
				ok: true,
				value: { number: '02-0017-0', site: '02', running: 17 }
			});
	});

	it('are refused with a sentence that says what to look for', () => {
		for (const text of [
			'',
			'17',
			'02-0017',
			'02-0000-6',
			'02-0017-0x',
			'02-0017-00',
			'a'.repeat(500)
		]) {
			const read = readSubjectNumber(text);
			expect(read.ok ? null : read.problem.code, text).toBe('SUBJECT_NUMBER_SHAPE');
			if (!read.ok) expect(read.problem.message.length).toBeLessThan(200);
		}
		const read = readSubjectNumber('02-0071-0');
		expect(read).toMatchObject({ ok: false, problem: { code: 'SUBJECT_NUMBER_CHECK_DIGIT' } });
		if (!read.ok) expect(read.problem.message).toContain('swapped digit');
	});

	it('are made from whole numbers in range only', () => {
		for (const running of [0, 10_000, 1.5, -1])
			expect(() => subjectNumber('02', running)).toThrow(RangeError);
		expect(() => subjectNumber('2', 1)).toThrow(RangeError);
	});
});
