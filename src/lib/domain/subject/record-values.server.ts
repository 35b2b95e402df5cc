import type { Reader } from '$lib/server/change';
import { numberText } from '$lib/units/convert';
import { isUnit, unitText } from '$lib/units/units';
import type { Measure } from '../study/definition';

/** A measurement as a line of the record: its value with its unit, or why there is none. */
export interface MeasurementLine {
	id: string;
	name: string;
	value: string;
	remarks: string[];
}

const withUnit = (text: string, unit: string) => {
	const said = isUnit(unit) ? unitText(unit) : unit;
	return said ? `${text} ${said}` : text;
};

/** The subject's measurements by visit, in the order of the schedule. */
export async function measurementsOf(
	reader: Reader,
	studyId: string,
	subjectId: string
): Promise<Map<string, MeasurementLine[]>> {
	const rows = await reader
		.selectFrom('measurement as n')
		.innerJoin('measure as m', 'm.id', 'n.measure_id')
		.select([
			'n.id',
			'n.visit_id',
			'm.name',
			'm.decimals',
			'm.spec',
			'n.value',
			'n.text_value',
			'n.readings',
			'n.unit',
			'n.entered_value',
			'n.entered_unit',
			'n.not_done_reason',
			'n.soft_answer',
			'n.comment'
		])
		.where('n.study_id', '=', studyId)
		.where('n.subject_id', '=', subjectId)
		.orderBy('m.position')
		.execute();
	const byVisit = new Map<string, MeasurementLine[]>();
	for (const row of rows) {
		const spec = row.spec as Partial<Measure> | null;
		const choice =
			spec && 'choices' in spec
				? spec.choices?.find((each) => each.key === row.text_value)?.name
				: undefined;
		const value =
			row.not_done_reason !== null
				? `not done: ${row.not_done_reason}`
				: row.value !== null
					? withUnit(numberText(row.value, row.decimals), row.unit)
					: (choice ?? row.text_value ?? 'no value');
		const remarks = [
			row.readings?.length ? `Readings ${row.readings.join(', ')}.` : '',
			row.entered_value !== null && row.entered_unit !== null && row.entered_unit !== row.unit
				? `Entered as ${withUnit(String(row.entered_value), row.entered_unit)}.`
				: '',
			row.soft_answer ? `Unusual value, answered: ${row.soft_answer}` : '',
			row.comment ?? ''
		].filter(Boolean);
		const line = { id: row.id, name: row.name, value, remarks };
		const own = byVisit.get(row.visit_id);
		if (own) own.push(line);
		else byVisit.set(row.visit_id, [line]);
	}
	return byVisit;
}
