import { convert, converts, quantityText } from '../../units/convert';
import type { UnitCode } from '../../units/units';
import { problem, type Problem } from '../problems';
import { decimalsOfMeasure, type StudyDefinition } from '../study/definition';

export type MeasuredNumber = { value: number; unit: UnitCode };

export type ComparisonProblem = {
	measures: [string, string];
	/** Soft: kept once the person has looked again and said so. */
	weight: 'hard' | 'soft';
	problem: Problem<'COMPARISON' | 'COMPARISON_ABOVE'>;
};

/**
 * Pairs of values at one visit that cannot both be right, such as a diastolic pressure that is not below the systolic.
 * Values that are not there are not compared.
 */
export function checkComparisons(
	definition: Pick<StudyDefinition, 'comparisons' | 'measures'>,
	values: Readonly<Record<string, MeasuredNumber | null | undefined>>
): ComparisonProblem[] {
	const measures = new Map(definition.measures.map((each) => [each.key, each]));
	return definition.comparisons.flatMap(({ lower, higher, orEqual, weight = 'hard' }) => {
		const [low, high] = [values[lower], values[higher]];
		const [lowMeasure, highMeasure] = [measures.get(lower), measures.get(higher)];
		if (!low || !high || !lowMeasure || !highMeasure || !converts(low.unit, high.unit)) return [];
		const value = convert(low.value, low.unit, high.unit);
		if (value < high.value || (orEqual && value === high.value)) return [];
		return [
			{
				measures: [lower, higher] as [string, string],
				weight,
				problem: problem(orEqual ? 'COMPARISON_ABOVE' : 'COMPARISON', {
					lower: lowMeasure.name,
					higher: highMeasure.name,
					lowerValue: quantityText(low.value, low.unit, decimalsOfMeasure(lowMeasure)),
					higherValue: quantityText(high.value, high.unit, decimalsOfMeasure(highMeasure))
				})
			}
		];
	});
}
