import type { ColumnRole, ImportRequest, MappingForm } from '$lib/domain/import/import.input';
import type { SuggestedMapping } from '$lib/domain/import/mapping';

interface Line {
	role: ColumnRole;
	name: string;
	unit: string;
	decimals: number;
}

type Known = Partial<Pick<ImportRequest, 'subject' | 'time' | 'visit' | 'characteristic'>> & {
	covariates?: ImportRequest['covariates'];
	measures: { column: string; name: string; unit: string; decimals: number }[];
	site?: ImportRequest['site'];
};

function lineOf(column: string, known: Known): Line {
	const line: Line = { role: 'leave out', name: column, unit: '1', decimals: 0 };
	const { time, site } = known;
	if (known.subject === column) line.role = 'subject';
	else if (time?.column === column) line.role = time.kind === 'number' ? 'time' : 'date';
	else if (time?.kind === 'date' && time.anchor.kind === 'column' && time.anchor.column === column)
		line.role = 'anchor date';
	else if (known.visit === column) line.role = 'visit';
	else if (site?.kind === 'column' && site.column === column) line.role = 'site';
	else if (known.characteristic?.column === column)
		return { ...line, role: 'choice', name: known.characteristic.name };
	const covariate = known.covariates?.find((each) => each.column === column);
	if (covariate) return { ...line, role: covariate.kind, name: covariate.name };
	const measure = known.measures.find((each) => each.column === column);
	if (measure) return { ...measure, role: 'measure' };
	return line;
}

/** The form as it opens: the mapping that was saved, or what the file suggests. */
export function startingForm(
	columns: readonly string[],
	saved: ImportRequest | null,
	suggestion: SuggestedMapping,
	version: number,
	siteCode: string
): MappingForm {
	const known: Known = saved ?? (suggestion as Known);
	const lines = columns.map((column) => lineOf(column, known));
	return {
		version,
		role: lines.map(({ role }) => role),
		name: lines.map(({ name }) => name.slice(0, 100)),
		unit: lines.map(({ unit }) => unit),
		decimals: lines.map(({ decimals }) => String(Math.min(6, decimals))),
		timeUnit: known.time?.kind === 'number' ? known.time.unit : 'day',
		site: saved?.site.kind === 'site' ? saved.site.code : siteCode,
		decimalSign: saved?.decimalSign ?? suggestion.decimalSign,
		missing: saved?.missing.join(' ') ?? ''
	};
}
