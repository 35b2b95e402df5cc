import { describe, expect, it } from 'vitest';
import { armsWords, measureWords, openingWords, targetWords, widthWords } from './words';

describe('a study in words', () => {
	it('says the ratio of arms', () => {
		const arm = (key: string, ratio: number) => ({ key, name: `Treatment ${key}`, ratio });
		expect(armsWords({ arms: [arm('A', 1), arm('B', 1)] })).toBe(
			'Two arms, allocated by chance in equal parts: Treatment A, Treatment B.'
		);
		expect(armsWords({ arms: [arm('A', 2), arm('B', 1)] })).toBe(
			'Two arms, allocated by chance in the ratio 2 to 1: Treatment A (2), Treatment B (1).'
		);
		expect(armsWords({ arms: [] })).toContain('nobody is randomised');
	});

	it('says where a window lies', () => {
		const visits = [{ key: 'baseline', name: 'Baseline' }];
		expect(
			targetWords({ anchor: 'randomisation', target: { amount: 3, unit: 'month' } }, visits)
		).toBe('3 months after randomisation');
		expect(
			targetWords({ anchor: 'visit:baseline', target: { amount: -1, unit: 'day' } }, visits)
		).toBe('1 day before Baseline');
		expect(targetWords({ anchor: 'enrolment', target: { amount: 0, unit: 'day' } }, visits)).toBe(
			'on the day of enrolment'
		);
		const day = (amount: number) => ({ amount, unit: 'day' as const });
		expect(widthWords({ before: day(14), after: day(1) })).toBe(
			'from 14 days before to 1 day after'
		);
		expect(widthWords({ before: day(0), after: day(7) })).toBe('up to 7 days after');
		expect(widthWords({ before: day(0), after: day(0) })).toBe('on that day only');
	});

	it('says what is accepted with its unit', () => {
		expect(
			measureWords({
				key: 'potassium',
				name: 'Potassium',
				kind: 'number',
				showLast: 'never',
				unit: 'mmol/L',
				decimals: 1,
				hardLow: 1.5,
				hardHigh: 10,
				softHigh: 6,
				notDoneReasons: ['Unwell']
			}).limits
		).toEqual(['accepted: 1.5 to 10.0 mmol/L', 'asked about above 6.0 mmol/L']);
	});

	it('puts days with the same hours together', () => {
		const at = (weekday: number, opens: string, closes: string) => ({ weekday, opens, closes });
		expect(
			openingWords([
				at(1, '13:00', '17:00'),
				at(1, '08:00', '12:00'),
				at(2, '08:00', '12:00'),
				at(2, '13:00', '17:00'),
				at(3, '09:00', '11:00')
			])
		).toBe('Monday to Tuesday 08:00 to 12:00 and 13:00 to 17:00; Wednesday 09:00 to 11:00');
		expect(openingWords([])).toBe('No opening hours yet.');
	});
});
