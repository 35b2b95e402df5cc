import { Refusal, type FieldErrors } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Writer } from '$lib/server/change';
import type { StudyDefinition } from './definition';
import { changesSince, type Draft } from './draft.reads.server';
import { applyEdits } from './edits';
import { inverseOf } from './edits-between';
import type { Edit, EditDraftInput } from './edits.input';
import { same } from './same';
import { settleStudy } from './settle.server';
import { shownFindings, type ShownFinding } from './shown-findings';
import { lockedDraft } from './study.commands.server';
import { readDefinition, type LocatedProblem } from './template';

/** 'visits[2].target.amount' as 'visits.month-3.target.amount': an item's place may change, its key says which it is. */
function fieldsOf(problems: readonly LocatedProblem[], tried: StudyDefinition): FieldErrors {
	const lists = tried as unknown as Record<string, unknown>;
	const fields: FieldErrors = {};
	for (const { path, problem } of problems) {
		const [, list = '', at, rest = ''] = /^(\w+)\[(\d+)\](.*)$/.exec(path) ?? [];
		const items = lists[list];
		const item = (at !== undefined && Array.isArray(items) ? items[Number(at)] : undefined) as
			Record<string, unknown> | undefined;
		const key = item?.key ?? item?.code ?? item?.version;
		fields[key === undefined ? path || 'body' : `${list}.${key}${rest}`] ??= problem.message;
	}
	return fields;
}

const listed = (says: readonly string[]) =>
	says.length > 4 ? `${says.slice(0, 4).join(' ')} And ${says.length - 4} more.` : says.join(' ');

/** Says who changed what since the version that an edit was based on. */
async function changedMeanwhile(writer: Writer, actor: Actor, draft: Draft, since: number) {
	const changes = await changesSince(writer, actor, draft, since);
	if (changes.length === 0) return new Refusal('STALE');
	const who = [...new Set(changes.map((each) => (each.own ? 'You, elsewhere,' : each.who)))];
	return new Refusal('DRAFT_CHANGED', {
		who: who.join(' and '),
		what: listed(changes.flatMap((each) => each.says))
	});
}

/** What people already rely on does not change by an amendment. */
async function refuseWhatStays(
	writer: Writer,
	studyId: string,
	before: StudyDefinition,
	after: StudyDefinition
): Promise<boolean> {
	const study = await writer
		.selectFrom('study')
		.select(['status', 'code', 'masked'])
		.where('id', '=', studyId)
		.executeTakeFirstOrThrow();
	if (study.status === 'draft') return false;
	if (after.code !== study.code)
		throw new Refusal('INVALID', {}, { code: 'The code of a study that is open stays.' });
	if (after.masked !== study.masked)
		throw new Refusal('INVALID', {}, { masked: 'Whether an open study is masked stays as it is.' });
	const gone = before.sites.find((site) => !after.sites.some(({ code }) => code === site.code));
	if (gone) {
		const known = await writer
			.selectFrom('site')
			.select('id')
			.where('study_id', '=', studyId)
			.where('code', '=', gone.code)
			.executeTakeFirst();
		if (known) throw new Refusal('SITE_STAYS', { site: gone.name });
	}
	return true;
}

/**
 * Changes the draft in place: all of the edits or none. Gives back the new version and the edits that undo these. Based on
 * an older version it is refused, with who changed what meanwhile; what would be no readable definition is refused
 * field by field; what is merely doubtful is for the check to find.
 */
export async function editDraft(
	actor: Actor,
	studyId: string,
	{ edits }: EditDraftInput,
	version: number
): Promise<{ version: number; inverse: Edit[]; findings: ShownFinding[] }> {
	const { definition, ...kept } = await keepEdits(actor, studyId, edits, version);
	return { ...kept, findings: shownFindings(definition) };
}

const keepEdits = (
	actor: Actor,
	studyId: string,
	edits: readonly Edit[],
	version: number
): Promise<{ version: number; inverse: Edit[]; definition: StudyDefinition }> =>
	change(actor, 'study.edit', { studyId }, async (writer) => {
		const draft = await lockedDraft(writer, studyId);
		if (draft.version !== version) throw await changedMeanwhile(writer, actor, draft, version);
		const edited = applyEdits(draft.definition, edits);
		if (!edited.ok) throw new Refusal('RULE', { why: edited.problem.message });
		const read = readDefinition(edited.value);
		if (!read.ok) throw new Refusal('INVALID', {}, fieldsOf(read.problems, edited.value));
		const { definition } = read;
		if (same(definition, draft.definition)) return { version, inverse: [], definition };
		const opened = await refuseWhatStays(writer, studyId, draft.definition, definition);
		const changed = await writer
			.updateTable('protocol_version')
			.set({ definition: JSON.stringify(definition) })
			.where('id', '=', draft.id)
			.where('version', '=', version)
			.returning('version')
			.execute();
		mustHaveChanged(changed);
		if (!opened) await keepStudyInStep(writer, studyId, draft.definition, definition);
		return {
			version: changed[0]?.version ?? version,
			inverse: inverseOf(draft.definition, edits),
			definition
		};
	});

/** Until it is first published, a study's own rows say what its draft says. */
async function keepStudyInStep(
	writer: Writer,
	studyId: string,
	before: StudyDefinition,
	after: StudyDefinition
): Promise<void> {
	const head = ({ code, name, masked }: StudyDefinition) => ({ code, name, masked });
	if (!same(head(before), head(after)))
		await writer.updateTable('study').set(head(after)).where('id', '=', studyId).execute();
	const rows = ({ sites, consentVersions }: StudyDefinition) => ({ sites, consentVersions });
	if (!same(rows(before), rows(after))) await settleStudy(writer, studyId, after);
}
