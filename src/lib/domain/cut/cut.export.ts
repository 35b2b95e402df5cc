import { stringify } from 'csv-stringify/sync';
import type { CutContent } from './content';

/**
 * A spreadsheet takes a cell that begins with one of these for a formula. A number stays a number, also a negative one.
 */
export const plainCell = (text: string): string =>
	/^(?:[=+\-@]|\p{Cc})/u.test(text) && !/^[+-]?\d+(\.\d+)?(e[+-]?\d+)?$/i.test(text)
		? `'${text}`
		: text;

const cell = (value: string | number | null | undefined): string =>
	value === null || value === undefined ? '' : plainCell(String(value));

/** A cut as one table: a row for each visit and measure; instants with their offset, dates as dates. */
export function cutCsv(content: CutContent): string {
	const traits = content.characteristics.map(({ key }) => key);
	const rows: string[][] = [
		[
			'subject',
			'imported_as',
			'site',
			'enrolled_on',
			'randomised_on',
			...traits.map((key) => `characteristic_${key}`),
			'visit',
			'visit_name',
			'visit_status',
			'happened_on',
			'study_time',
			'measure',
			'value',
			'text',
			'readings',
			'unit',
			'not_done',
			'taken_at',
			'entered_at',
			'source'
		].map(cell)
	];
	for (const subject of content.subjects) {
		const who = [
			subject.number,
			subject.importedAs,
			subject.site,
			subject.enrolledOn,
			subject.randomisedOn,
			...traits.map((key) => subject.characteristics[key])
		].map(cell);
		for (const visit of subject.visits) {
			const when = [visit.key, visit.name, visit.status, visit.happenedOn, visit.studyTime].map(
				cell
			);
			for (const [key, value] of Object.entries(visit.values).sort(([a], [b]) => (a < b ? -1 : 1)))
				rows.push([
					...who,
					...when,
					...[
						key,
						value.value,
						value.text,
						value.readings?.join(' ') ?? null,
						value.unit,
						value.notDone,
						value.takenAt,
						value.enteredAt,
						value.source
					].map(cell)
				]);
		}
	}
	return stringify(rows, { record_delimiter: '\r\n' });
}
