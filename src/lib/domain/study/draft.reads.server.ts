import { sql } from 'kysely';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import type { StudyDefinition } from './definition';
import { differences, type Difference } from './differences';
import { shownFindings, type ShownFinding } from './shown-findings';
import { readDefinition } from './template';

export interface Draft {
	id: string;
	number: number;
	version: number;
	status: 'draft' | 'published';
	definition: StudyDefinition;
}

/** What one person changed in a draft at one time, in words. */
export interface DraftChange {
	who: string;
	own: boolean;
	at: string;
	says: string[];
}

function held(definition: unknown): StudyDefinition {
	const found = readDefinition(definition);
	if (!found.ok) throw new Error('A stored study definition does not hold.');
	return found.definition;
}

/** Within a read or a change: the newest protocol version of the study, whatever its state. */
export async function newestVersion(reader: Reader, studyId: string): Promise<Draft> {
	const found = await reader
		.selectFrom('protocol_version')
		.select(['id', 'number', 'version', 'status', 'definition'])
		.where('study_id', '=', studyId)
		.orderBy('number', 'desc')
		.limit(1)
		.executeTakeFirst();
	if (!found) throw new Refusal('NOT_FOUND');
	return { ...found, definition: held(found.definition) };
}

/** How many of the latest changes are told; more of them say little to somebody who was away that long. */
const mostChanges = 30;

export const toldIn = (told: readonly Difference[]): string[] => told.flatMap(({ says }) => says);

/**
 * Within a read or a change: what was changed in the draft since it had `since` as its version, the oldest first. It
 * comes from the audit trail, in which each change of the draft is one event: as many as its version rose by.
 */
export async function changesSince(
	reader: Reader,
	actor: Actor,
	draft: Pick<Draft, 'id' | 'version'>,
	since: number
): Promise<DraftChange[]> {
	const count = Math.min(draft.version - since, mostChanges);
	if (count <= 0) return [];
	const { rows } = await sql<{
		at: Date;
		actor: string;
		who: string;
		before: { definition?: unknown };
		after: { definition?: unknown };
	}>`select e.at, e.actor, p.name as who, e.before, e.after from audit.event e join app.person p on p.id = e.actor
		where e.record = 'protocol_version' and e.record_id = ${draft.id} and e.action = 'change'
		order by e.id desc limit ${count}`.execute(reader);
	return rows.reverse().map((row) => ({
		who: row.who,
		own: row.actor === actor.personId,
		at: row.at.toISOString(),
		says:
			row.before?.definition && row.after?.definition
				? toldIn(differences(held(row.before.definition), held(row.after.definition)))
				: ['Published.']
	}));
}

/** The draft as it stands for those who edit it; refused where the newest version is no draft. */
export const getDraft = (actor: Actor, studyId: string): Promise<Draft & { opened: boolean }> =>
	read(actor, 'study.edit', { studyId }, async (reader) => {
		const newest = await newestVersion(reader, studyId);
		const study = await reader
			.selectFrom('study')
			.select('status')
			.where('id', '=', studyId)
			.executeTakeFirstOrThrow();
		return { ...newest, opened: study.status !== 'draft' };
	});

export interface DraftNews {
	id: string;
	version: number;
	status: 'draft' | 'published';
	/** Null where nothing changed. */
	definition: StudyDefinition | null;
	changes: DraftChange[];
	findings: ShownFinding[];
}

/** Whether the draft changed since a version, by whom and how. Asked every few seconds by an open screen. */
export const findNews = (actor: Actor, studyId: string, since: number): Promise<DraftNews> =>
	read(actor, 'study.edit', { studyId }, async (reader) => {
		const head = await reader
			.selectFrom('protocol_version')
			.select(['id', 'version', 'status'])
			.where('study_id', '=', studyId)
			.orderBy('number', 'desc')
			.limit(1)
			.executeTakeFirst();
		if (!head) throw new Refusal('NOT_FOUND');
		if (head.version === since) return { ...head, definition: null, changes: [], findings: [] };
		const draft = await newestVersion(reader, studyId);
		const changes = await changesSince(reader, actor, draft, since);
		return {
			id: draft.id,
			version: draft.version,
			status: draft.status,
			definition: draft.definition,
			changes,
			findings: shownFindings(draft.definition)
		};
	});
