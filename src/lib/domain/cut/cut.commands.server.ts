import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, read, type Writer } from '$lib/server/change';
import { canonical, type Json } from './canonical';
import { measurementsIn, type CutContent } from './content';
import { instantOf, type CutInput } from './cut.input';
import { fingerprintNow } from './fingerprint.server';
import { snapshot } from './snapshot.server';

async function nextNumber(writer: Writer, studyId: string): Promise<number> {
	await sql`select pg_advisory_xact_lock(hashtextextended(${`cut:${studyId}`}, 0))`.execute(writer);
	const { most } = await writer
		.selectFrom('cut')
		.select((eb) => eb.fn.max('number').as('most'))
		.where('study_id', '=', studyId)
		.executeTakeFirstOrThrow();
	return (most ?? 0) + 1;
}

const textOf = (content: CutContent) => canonical(content as unknown as Json);

/** Freezes the study as it stood at the cut-off, and its allocations apart, in one transaction. */
export const freezeCut = (actor: Actor, studyId: string, input: CutInput) =>
	change(actor, 'cut.make', { studyId }, async (writer) => {
		const {
			rows: [moment]
		} = await sql<{ now: Date }>`select app.now() as now`.execute(writer);
		const now = moment?.now as Date;
		const cutOff = input.cutOffAt === '' ? now : (instantOf(input.cutOffAt) as Date);
		if (cutOff > now)
			throw new Refusal(
				'FUTURE',
				{ what: 'The cut-off' },
				{ cutOffAt: 'The cut-off lies in the future.' }
			);
		const content = await snapshot(writer, studyId, cutOff);
		const measurements = content ? measurementsIn(content) : 0;
		if (!content || measurements === 0)
			throw new Refusal(
				'EMPTY_CUT',
				{},
				{ cutOffAt: 'There is no measurement before this instant.' }
			);
		const text = textOf(content);
		const id = newId();
		const number = await nextNumber(writer, studyId);
		const fingerprint = fingerprintNow(text);
		await writer
			.insertInto('cut')
			.values({
				id,
				study_id: studyId,
				number,
				label: input.label,
				cut_off_at: cutOff,
				extracted_at: now,
				made_by: actor.personId,
				subjects: content.subjects.length,
				measurements,
				fingerprint,
				content: text
			})
			.execute();
		await sql`select closed.freeze_allocation(${id}::uuid)`.execute(writer);
		return { id, number, fingerprint, subjects: content.subjects.length, measurements };
	});

/** The fingerprint of the same cut made again from the live data and their trail: equal, or something is wrong. */
export const remakeCut = (actor: Actor, studyId: string, cutId: string) =>
	read(actor, 'cut.read', { studyId }, async (reader) => {
		const cut = await reader
			.selectFrom('cut')
			.select(['number', 'fingerprint', 'cut_off_at', 'content'])
			.where('id', '=', cutId)
			.where('study_id', '=', studyId)
			.executeTakeFirst();
		if (!cut) throw new Refusal('NOT_FOUND');
		const { format } = JSON.parse(cut.content) as CutContent;
		const content = await snapshot(reader, studyId, cut.cut_off_at, format);
		const again = content ? fingerprintNow(textOf(content)) : null;
		return {
			number: cut.number,
			fingerprint: cut.fingerprint,
			again,
			same: again === cut.fingerprint
		};
	});

/** The cut's whole content, for those who may take it out; the taking stands in the trail. */
export const takeOutCut = (
	actor: Actor,
	studyId: string,
	cutId: string,
	format: 'json' | 'csv'
): Promise<{ number: number; text: string }> =>
	change(actor, 'cut.export', { studyId }, async (writer) => {
		const cut = await writer
			.selectFrom('cut')
			.select(['number', 'content'])
			.where('id', '=', cutId)
			.where('study_id', '=', studyId)
			.executeTakeFirst();
		if (!cut) throw new Refusal('NOT_FOUND');
		await sql`select audit.act('cut', ${cutId}, ${studyId}::uuid, null, null, ${JSON.stringify({ taken: format })}::jsonb)`.execute(
			writer
		);
		return { number: cut.number, text: cut.content };
	});
