import { dependence, estimates, figures, fit, provenance } from './answer';
import { count, groupedHex, instant } from './format';
import { checkInput, ReportFault, type LookReportInput } from './input';
import { names as namesOf } from './names';
import { participants } from './participants';
import { asked, people } from './question';
import { reportText, type CautionNode, type Definition, type ReportTree } from './tree';
import { fill, words } from './words';

/** One interim look as a report. Pure: same input, same tree. Throws a ReportFault when the input may not be printed. */
export function lookReport(input: LookReportInput): ReportTree {
	checkInput(input);
	const names = namesOf(input);
	const { study, cut, look, result, released } = input;
	const byArm = input.group?.kind === 'arm';
	const unplanned = byArm && !look.planned;
	const kind = `${words.title[input.kind]}${byArm ? ', by arm' : ''}`;
	const name = `${study.code}, look ${look.number}: ${kind.charAt(0).toLowerCase()}${kind.slice(1)}`;

	const facts: Definition[] = [
		{ term: 'Study', text: `${study.name} (${study.code})` },
		{ term: 'Cut', text: cut.label },
		{ term: 'Cut-off', text: instant(cut.cutOffAt) },
		{ term: 'Extracted', text: instant(cut.extractedAt) },
		{
			term: 'In the cut',
			text: `${count(cut.subjects)} subjects, ${count(cut.measurements)} measurements`
		},
		{ term: 'Fingerprint', text: groupedHex(cut.fingerprint) },
		{ term: 'Made', text: `${instant(input.provenance.madeAt)} by ${input.provenance.madeBy}` },
		...(released
			? [{ term: 'This copy', text: `made for ${released.to}, ${instant(released.at)}` }]
			: []),
		...(byArm
			? [{ term: 'Planned', text: look.planned ? 'yes, the model of the monitoring plan' : 'no' }]
			: [])
	];

	const tree: ReportTree = {
		title: `${study.code}: look ${look.number}, ${kind.charAt(0).toLowerCase()}${kind.slice(1)}`,
		language: 'en-GB',
		kind: input.kind,
		cover: {
			overline: `${study.name} (${study.code})`,
			title: `Look ${look.number}`,
			subtitle: kind,
			facts,
			cautions: cautions(input, unplanned)
		},
		everyPage: {
			name,
			banners: [
				...(unplanned ? [words.notPlanned.page] : []),
				...(result.converged ? [] : [words.notConverged.page]),
				...(study.training ? [words.training.page] : [])
			],
			fingerprint: cut.fingerprint,
			released: released ? { to: released.to, at: instant(released.at) } : null
		},
		body: [
			...asked(input, names),
			...participants(input),
			...people(input, names),
			...estimates(input, names),
			...dependence(input),
			...fit(input),
			...figures(input, names),
			...provenance(input)
		]
	};
	refuseArmNames(input, tree);
	return tree;
}

function cautions(input: LookReportInput, unplanned: boolean): CautionNode[] {
	const warning = (title: string, text: string): CautionNode => ({
		kind: 'caution',
		tone: 'warning',
		title,
		text
	});
	const caution = (of: { title: string; text: string }): CautionNode => ({
		kind: 'caution',
		tone: 'caution',
		title: of.title,
		text: fill(of.text, { measure: input.measure.name })
	});
	return [
		...(input.result.converged
			? []
			: [
					warning(
						words.notConverged.title,
						fill(words.notConverged.text, { iterations: String(input.result.iterations) })
					)
				]),
		...(unplanned ? [warning(words.notPlanned.cover, words.notPlanned.text)] : []),
		...(input.study.training ? [warning(words.training.title, words.training.text)] : []),
		...(input.kind === 'closed' ? [caution(words.cautions.closed)] : []),
		caution(words.cautions.research),
		...(input.measure.derived ? [caution(words.cautions.derived)] : []),
		caution(words.cautions.order)
	];
}

/**
 * Free words (a question, a model sentence, a note) could carry an arm's name into a report that is
 * coded by letter. The study's own name and the standing words are left out of the search: an arm
 * called "standard" must not fall over "standard error".
 */
function refuseArmNames(input: LookReportInput, tree: ReportTree): void {
	if (input.group?.kind !== 'arm') return;
	const armNames = input.result.model.groupLevels.filter((level) => !/^[A-Z]$/.test(level));
	if (armNames.length === 0) return;
	const free = [
		input.look.question,
		input.modelWords,
		input.estimand ?? '',
		input.sensitivity ?? '',
		input.cut.label,
		input.cut.id,
		...Object.values(input.covariates ?? {}).map((c) => c.label),
		...input.result.notes.map((n) => n.sentence),
		...(input.flow?.flow.excluded ?? []).map(({ label }) => label)
	];
	const printed = reportText(tree);
	for (const armName of armNames) {
		const word = armName.replace(/[.*+?^${}()|[\]\\]/g, '\\$&');
		const found = new RegExp(`(?<![\\p{L}\\p{N}])${word}(?![\\p{L}\\p{N}])`, 'iu');
		const coded = new RegExp(`\\[[^\\]]*${word}[^\\]]*\\]`, 'iu');
		if (free.some((text) => found.test(text)) || printed.some((text) => coded.test(text))) {
			throw new ReportFault(
				'ARM_NAME_SHOWN',
				'an arm is named in the words of a report coded by letter'
			);
		}
	}
}
