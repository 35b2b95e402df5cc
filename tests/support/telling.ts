import type { StudyDefinition } from '../../src/lib/domain/study/definition';

/** A laboratory value that the treatment changes, at month 6, and what is derived from it: the arm could be read off it. */
export function withTellingMeasure(definition: StudyDefinition): StudyDefinition {
	return {
		...definition,
		measures: [
			...definition.measures,
			{
				key: 'urine-glucose',
				name: 'Urine glucose',
				kind: 'number',
				unit: 'mmol/L',
				decimals: 2,
				hardLow: 0,
				hardHigh: 400,
				showLast: 'never',
				notDoneReasons: ['Sample lost'],
				couldRevealArm: { enteredBy: 'pharmacist' }
			},
			{
				key: 'urine-glucose-mean',
				name: 'Urine glucose, mean',
				kind: 'derived',
				unit: 'mmol/L',
				decimals: 2,
				showLast: 'never',
				derivedBy: { formula: 'mean', inputs: { first: 'measure:urine-glucose' } }
			}
		],
		schedule: {
			...definition.schedule,
			'month-6': [...(definition.schedule['month-6'] ?? []), 'urine-glucose', 'urine-glucose-mean']
		}
	};
}
