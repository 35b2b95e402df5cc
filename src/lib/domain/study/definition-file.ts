import type { LocatedProblem } from './template';
import { readTemplate } from './template';
import { checkDefinition } from './check';
import { problem } from '../problems';
import type { StudyDefinition } from './definition';
import { readDefinition } from './template';

/** The largest file of a study definition that is read, in bytes: several times one with 100 visits and 200 measures. */
export const largestDefinitionFile = 2 * 1024 * 1024;

/**
 * The definition in one fixed form: fields in the order of the schema, visits in their own order, the grid in the order
 * of the visits, visits without measures left out of it. Two definitions that say the same are the same text.
 */
export function normalised(definition: StudyDefinition): StudyDefinition {
	const read = readDefinition(definition);
	if (!read.ok) throw new Error('Only a definition that holds can be put in order.');
	const ordered = read.definition;
	const visits = [...ordered.visits].sort((a, b) => a.order - b.order);
	const keys = new Set([
		...visits.map((visit) => visit.key),
		...Object.keys(ordered.schedule).sort()
	]);
	return {
		...ordered,
		visits,
		measures: ordered.measures.map((measure) =>
			measure.kind === 'derived'
				? {
						...measure,
						derivedBy: {
							formula: measure.derivedBy.formula,
							inputs: Object.fromEntries(
								Object.entries(measure.derivedBy.inputs).sort(([a], [b]) => (a < b ? -1 : 1))
							)
						}
					}
				: measure
		),
		schedule: Object.fromEntries(
			[...keys].flatMap((key) => {
				const measures = ordered.schedule[key] ?? [];
				return measures.length > 0 ? [[key, measures]] : [];
			})
		)
	};
}

/** The definition as a file that `readStudyFile` takes back. */
export const definitionText = (definition: StudyDefinition): string =>
	`${JSON.stringify(normalised(definition), null, '\t')}\n`;

/** What makes a file unfit to begin a study from, because the screens could not show where it leads. */
const unfit = new Set([
	'KEY_TWICE',
	'ANCHOR_UNKNOWN',
	'ANCHOR_CYCLE',
	'ANCHOR_SELF',
	'VISIT_UNKNOWN',
	'MEASURE_UNKNOWN',
	'MEASURE_LISTED_TWICE',
	'CHARACTERISTIC_UNKNOWN',
	'FORMULA_CYCLE',
	'PLAN_SITE_UNKNOWN'
]);

export type ReadStudyFile =
	{ ok: true; definition: StudyDefinition } | { ok: false; problems: LocatedProblem[] };

/**
 * The study that an uploaded file describes, or why it cannot be taken: not JSON, of another kind, with fields nobody
 * knows, or referring to what is not in it. What is merely not ready for publishing is taken, as a draft.
 */
export function readStudyFile(bytes: Uint8Array): ReadStudyFile {
	const refuse = (...problems: LocatedProblem[]): ReadStudyFile => ({ ok: false, problems });
	if (bytes.length > largestDefinitionFile)
		return refuse({
			path: '',
			problem: problem('FILE_TOO_LARGE', { limit: largestDefinitionFile / 1024 / 1024 })
		});
	let text: string;
	try {
		text = new TextDecoder('utf-8', { fatal: true }).decode(bytes);
	} catch {
		return refuse({ path: '', problem: problem('FILE_NOT_TEXT') });
	}
	if (text.includes('\u0000') || text.includes('\\u0000'))
		return refuse({ path: '', problem: problem('FILE_NOT_TEXT') });
	const kind = /"format"\s*:\s*"([^"]{0,60})"/.exec(text)?.[1];
	if (text.trim().startsWith('{') && kind !== undefined && kind !== 'heddle.study/1')
		return refuse({ path: 'format', problem: problem('FILE_OTHER_KIND', { kind }) });
	const read = readTemplate(text);
	if (!read.ok) return read;
	const broken = checkDefinition(read.definition).filter(({ problem: { code } }) =>
		unfit.has(code)
	);
	if (broken.length > 0) return refuse(...broken.map(({ path, problem }) => ({ path, problem })));
	return { ok: true, definition: normalised(read.definition) };
}
