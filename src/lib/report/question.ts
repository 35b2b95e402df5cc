import { count } from './format';
import type { LookReportInput } from './input';
import { chosen, type Names } from './names';
import { DF, heading, inBrackets, METHOD, notes, paragraph, plural } from './parts';
import type { Definition, ReportNode, TableNode } from './tree';
import { fill, words } from './words';

/** What was asked, of whom: the part of a report that is known before any number. */
export function asked(input: LookReportInput, names: Names): ReportNode[] {
	const { result, estimand } = input;
	const { model } = result;
	const facts: Definition[] = [
		{ term: 'Outcome', text: inBrackets(input.measure.name, input.measure.unit) },
		{
			term: 'Time',
			text: `${input.time.name} in ${input.time.unit}; times used run from ${chosen(model.timeRange.from)} to ${chosen(model.timeRange.to)}`
		},
		{
			term: 'Mean',
			text: result.coefficients.map((c) => names.coefficient(c).label).join('; ')
		},
		{
			term: 'Dependence',
			text: model.randomIntercept ? words.dependence.own : words.dependence.none
		},
		{ term: 'Fitted by', text: METHOD[model.method] },
		{ term: 'Degrees of freedom', text: DF[model.degreesOfFreedom] },
		{
			term: 'Estimand',
			text: estimand ? fill(words.estimand.given, { text: estimand }) : words.estimand.absent
		}
	];
	return [
		heading('What was asked'),
		paragraph(input.look.question),
		heading('The model', 2),
		paragraph(input.modelWords),
		{ kind: 'definitions', items: facts }
	];
}

export function people(input: LookReportInput, names: Names): ReportNode[] {
	const { counts, groups } = input.result;
	const facts: Definition[] = [
		{
			term: 'Used',
			text: `${plural(counts.observations, 'measurement')} of ${plural(counts.subjects, 'subject')}`
		},
		{
			term: 'For each subject',
			text: `from ${count(counts.fewestPerSubject)} to ${count(counts.mostPerSubject)} measurements`
		},
		{ term: 'Rows handed to the model', text: count(counts.rows) },
		{ term: 'Outcome missing', text: plural(counts.droppedOutcomes, 'row') },
		{
			term: 'Group or covariate missing',
			text: [
				plural(counts.droppedRows, 'row'),
				...counts.missingByVariable.map(
					(m) =>
						`${m.name === 'group' ? 'group' : (input.covariates?.[m.name]?.label ?? m.name)} in ${count(m.rows)}`
				)
			].join('; ')
		},
		{ term: 'Subjects with no usable row', text: count(counts.droppedSubjects) }
	];
	const table: TableNode | null =
		groups.length > 0
			? {
					kind: 'table',
					caption: 'Who is in each group',
					columns: [
						{ label: groupHeading(input), numeric: false },
						{ label: 'Subjects', numeric: true },
						{ label: 'Measurements', numeric: true }
					],
					rows: [...groups]
						.sort((a, b) => names.position(a.name) - names.position(b.name))
						.map((g) => [names.group(g.name), count(g.subjects), count(g.observations)])
				}
			: null;
	return [
		heading('People and measurements'),
		{ kind: 'definitions', items: facts },
		...(table ? [table] : []),
		...notes(input, 'rows-dropped', 'subjects-dropped'),
		heading('What is missing', 2),
		paragraph(words.missing.assumption),
		paragraph(words.missing.meaning),
		paragraph(
			input.sensitivity
				? fill(words.missing.sensitivity, { text: input.sensitivity })
				: words.missing.noSensitivity
		)
	];
}

function groupHeading(input: LookReportInput): string {
	if (!input.group) return 'Group';
	return input.group.kind === 'arm'
		? 'Arm'
		: input.group.label.charAt(0).toUpperCase() + input.group.label.slice(1);
}
