import { plainDateOf } from '../../time/dates';
import type { StudyDefinition } from './definition';
import { emptyDefinition } from './empty';

/** A study as large as they come, for tests and figures: 60 visits in months, 150 measures, all of them at each visit. */
export function bigDefinition(visits = 60, measures = 150, code = 'BIG-1'): StudyDefinition {
	const base = emptyDefinition(code, 'A large study');
	const [visit] = base.visits;
	const [measure] = base.measures;
	if (!visit || measure?.kind !== 'number') throw new Error('The empty study changed.');
	const day = (amount: number) => ({ amount, unit: 'day' as const });
	const keys = Array.from({ length: measures }, (_, at) => `measure-${at + 1}`);
	const planned = Array.from({ length: visits }, (_, at) => ({
		...visit,
		key: `month-${at}`,
		name: `Month ${at}`,
		target: { amount: at, unit: 'month' as const },
		before: day(at === 0 ? 0 : 7),
		after: day(7),
		order: at + 1
	}));
	return {
		...base,
		sites: [
			{
				code: '01',
				name: 'Northmoor',
				zone: 'Europe/London',
				openingHours: [{ weekday: 1, opens: '08:00', closes: '17:00' }],
				rooms: [{ key: 'room-1', name: 'Room 1' }]
			}
		],
		visits: planned,
		measures: keys.map((key, at) => ({
			...measure,
			key,
			name: `Measure ${at + 1}`,
			hardLow: 0,
			hardHigh: 100
		})),
		schedule: Object.fromEntries(planned.map((each) => [each.key, keys])),
		baselineVisit: 'month-0',
		primaryMeasure: 'measure-1',
		consentVersions: [
			{ version: '1.0', name: 'Consent form, version 1.0', from: plainDateOf('2026-01-05') }
		],
		eligibility: [{ key: 'adult', kind: 'inclusion', text: 'Aged 18 years or over.' }]
	};
}
