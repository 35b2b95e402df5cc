import { sql } from 'kysely';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, read, type Reader } from '$lib/server/change';
import { may } from '$lib/server/permission';
import type { JobStatus } from '$lib/server/db/tables';
import type { CutHead } from '../cut/cut.reads.server';
import { lookSpec, type LookSpec } from './look.input';
import { lookChoices } from './choices.server';
import { isRefused, type LookRefused, type LookResult } from './result';
import { wordsOf } from './words';

/** A look by arm, for everyone who may not read it: that it exists, and its number. */
export interface ClosedLook {
	id: string;
	number: number;
	kind: 'by arm';
	open: false;
}

export interface OpenLook {
	id: string;
	number: number;
	kind: 'pooled' | 'by arm';
	open: true;
	planned: boolean;
	status: JobStatus;
	error: string | null;
	jobRunId: string | null;
	requestedBy: string;
	requestedAt: string;
	cut: { number: number; label: string };
	/** The question; in a list, of pooled looks only: reading a by-arm one is an act of its own. */
	question: string | null;
}

/** A whole look with its model and, once there is one, its result. */
export interface WholeLook extends Omit<OpenLook, 'cut'> {
	cut: CutHead;
	spec: LookSpec;
	result: LookResult | null;
	inputHash: string | null;
	engineVersion: string | null;
	finishedAt: string | null;
}

const rows = (reader: Reader, studyId: string) =>
	reader
		.selectFrom('look')
		.innerJoin('cut', 'cut.id', 'look.cut_id')
		.innerJoin('person', 'person.id', 'look.requested_by')
		.innerJoin('person as maker', 'maker.id', 'cut.made_by')
		.where('look.study_id', '=', studyId)
		.select([
			'look.id',
			'look.number',
			'look.kind',
			'look.planned',
			'look.status',
			'look.spec',
			'look.error',
			'look.input_hash',
			'look.engine_version',
			'look.job_run_id',
			'look.requested_at',
			'look.finished_at',
			'person.name as requested_by',
			'cut.id as cut_id',
			'cut.number as cut_number',
			'cut.label',
			'cut.cut_off_at',
			'cut.extracted_at',
			'cut.subjects',
			'cut.measurements',
			'cut.fingerprint',
			'maker.name as made_by'
		]);
type Row = Awaited<ReturnType<ReturnType<typeof rows>['execute']>>[number];

const closedOf = (row: Row): ClosedLook => ({
	id: row.id,
	number: row.number,
	kind: 'by arm',
	open: false
});

const headOf = (row: Row): Omit<OpenLook, 'question' | 'cut'> => ({
	id: row.id,
	number: row.number,
	kind: row.kind,
	open: true,
	planned: row.planned,
	status: row.status,
	error: row.error,
	jobRunId: row.job_run_id,
	requestedBy: row.requested_by,
	requestedAt: row.requested_at.toISOString()
});

const mayReadArms = (actor: Actor, studyId: string) =>
	may(actor.grants, 'look.by-arm', { studyId });

/** Newest first. */
export const findLooks = (actor: Actor, studyId: string): Promise<(OpenLook | ClosedLook)[]> =>
	read(actor, 'look.read', { studyId }, async (reader) => {
		const found = await rows(reader, studyId).orderBy('look.number', 'desc').execute();
		if (found.length === 0) return [];
		const { definition } = await lookChoices(reader, studyId);
		return found.map((row) =>
			row.kind === 'by arm' && !mayReadArms(actor, studyId)
				? closedOf(row)
				: {
						...headOf(row),
						cut: { number: row.cut_number, label: row.label },
						question: row.spec ? wordsOf(lookSpec.parse(row.spec), definition).question : null
					}
		);
	});

interface ReadOfArms {
	spec: unknown;
	result: LookResult | LookRefused | null;
	inputHash: string | null;
}

const wholeOf = (
	row: Row,
	spec: LookSpec,
	question: string,
	held: { result: LookResult | null; inputHash: string | null; error?: string }
): WholeLook => ({
	...headOf(row),
	error: held.error ?? row.error,
	question,
	spec,
	result: held.result,
	inputHash: held.inputHash,
	engineVersion: row.engine_version,
	finishedAt: row.finished_at?.toISOString() ?? null,
	cut: {
		id: row.cut_id,
		number: row.cut_number,
		label: row.label,
		cutOffAt: row.cut_off_at.toISOString(),
		extractedAt: row.extracted_at.toISOString(),
		madeBy: row.made_by,
		subjects: row.subjects,
		measurements: row.measurements,
		fingerprint: row.fingerprint
	}
});

/** One look. A by-arm one is opened for the independent statistician alone, and the opening stands in the trail. */
export async function getLook(
	actor: Actor,
	studyId: string,
	lookId: string
): Promise<WholeLook | ClosedLook> {
	const find = async (reader: Reader) => {
		const row = await rows(reader, studyId).where('look.id', '=', lookId).executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		return row;
	};
	const seen = await read(actor, 'look.read', { studyId }, async (reader) => {
		const row = await find(reader);
		if (row.kind === 'by arm') return { row, whole: null };
		const held = await reader
			.selectFrom('look')
			.select('result')
			.where('id', '=', lookId)
			.where('study_id', '=', studyId)
			.executeTakeFirstOrThrow();
		const spec = lookSpec.parse(row.spec);
		const { definition } = await lookChoices(reader, studyId);
		const result = held.result as unknown as LookResult | null;
		const words = result?.words ?? wordsOf(spec, definition);
		return {
			row,
			whole: wholeOf(row, spec, words.question, { result, inputHash: row.input_hash })
		};
	});
	if (seen.whole) return seen.whole;
	if (!mayReadArms(actor, studyId)) return closedOf(seen.row);
	return change(actor, 'look.by-arm', { studyId }, async (writer) => {
		const row = await find(writer);
		const {
			rows: [opened]
		} = await sql<{
			held: ReadOfArms | null;
		}>`select closed.read_look(${lookId}::uuid) as held`.execute(writer);
		const held = opened?.held;
		if (!held) throw new Refusal('NOT_FOUND');
		const spec = lookSpec.parse(held.spec);
		const { definition } = await lookChoices(writer, studyId);
		const refused = held.result && isRefused(held.result) ? held.result.refused : undefined;
		const result = held.result && !isRefused(held.result) ? held.result : null;
		const words = result?.words ?? wordsOf(spec, definition);
		return wholeOf(row, spec, words.question, {
			result,
			inputHash: held.inputHash,
			...(refused === undefined ? {} : { error: refused })
		});
	});
}
