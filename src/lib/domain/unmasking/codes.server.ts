import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import { systemActor, type Actor } from '$lib/server/actor';
import { change, read, type Reader, type Writer } from '$lib/server/change';
import { closedConfig, config } from '$lib/server/config';
import { beginRun, supervised } from '$lib/server/jobs/run';
import type { Delivery } from '$lib/server/jobs/worker';
import { log } from '$lib/server/log';
import { renderCodeSheets, type CodeSheet } from '$lib/server/pdf/code-sheets';
import { closedArea, seal, unseal } from '$lib/server/storage/closed';
import { sha256Of } from '$lib/server/storage/storage';
import { clock } from '$lib/time/clock';
import { instantText } from '$lib/time/zones';
import { getPublished } from '../study/study.reads.server';
import { sitesFor, type SiteHead } from '../study/sites.server';
import { codeText } from './code';
import { hashOfCode, newCode } from './code.server';

/**
 * Sealed codes for the time in which Heddle cannot be reached. The look worker writes a sheet for each kit of a site that
 * has none yet: the arm and a code, to be folded in and sealed. The paper alone answers in an emergency; the code, which
 * only who opened the envelope can know, is entered afterwards and is taken once. Whoever prints holds an unmasked role.
 */

export interface CodePrint {
	id: string;
	site: string;
	asked: string;
	by: string;
	status: 'waiting' | 'made' | 'failed';
	kits: number | null;
	jobRunId: string | null;
}

export const getCodePrints = (
	actor: Actor,
	studyId: string
): Promise<{ sites: SiteHead[]; prints: CodePrint[] }> =>
	read(actor, 'code.print', { studyId }, async (reader) => {
		const rows = await reader
			.selectFrom('code_print as c')
			.innerJoin('site as t', 't.id', 'c.site_id')
			.innerJoin('person as p', 'p.id', 'c.asked_by')
			.select([
				'c.id',
				't.name as site',
				't.zone',
				'c.asked_at',
				'p.name as by',
				'c.status',
				'c.kits',
				'c.job_run_id as jobRunId'
			])
			.where('c.study_id', '=', studyId)
			.orderBy('c.asked_at', 'desc')
			.orderBy('c.id', 'desc')
			.limit(100)
			.execute();
		return {
			sites: await sitesFor(reader, actor, studyId, 'code.print'),
			prints: rows.map(({ asked_at, zone, ...row }) => ({
				...row,
				asked: instantText(asked_at, zone)
			}))
		};
	});

export const askForCodes = (
	actor: Actor,
	studyId: string,
	siteId: string
): Promise<{ id: string; jobRunId: string }> =>
	change(actor, 'code.print', { studyId, siteId }, async (writer) => {
		const site = await writer
			.selectFrom('site')
			.select('id')
			.where('study_id', '=', studyId)
			.where('id', '=', siteId)
			.executeTakeFirst();
		if (!site) throw new Refusal('INVALID', {}, { siteId: 'Choose one of the list.' });
		const study = await writer
			.selectFrom('study')
			.select('masked')
			.where('id', '=', studyId)
			.executeTakeFirstOrThrow();
		if (!study.masked) throw new Refusal('NOTHING_MASKED');
		const id = newId();
		const jobRunId = await beginRun(writer, actor, {
			queue: 'sealed-codes',
			title: 'Sealed codes',
			studyId
		});
		await writer
			.insertInto('code_print')
			.values({
				id,
				study_id: studyId,
				site_id: siteId,
				asked_by: actor.personId,
				job_run_id: jobRunId
			})
			.execute();
		await writer.enqueue('sealed-codes', { printId: id, jobRunId });
		return { id, jobRunId };
	});

/** Kits that are or were at the site and have no sheet yet, with what they hold. For the look worker alone. */
async function kitsWithoutSheet(reader: Reader, studyId: string, siteId: string) {
	const { rows } = await sql<{ kit: string; arm: string }>`
		select l.kit_number as kit, l.arm_key as arm from closed.list_position l
		where l.study_id = ${studyId}::uuid
			and (exists (select from app.subject s where s.study_id = l.study_id and s.site_id = ${siteId}::uuid and s.kit_number = l.kit_number)
				or exists (select from app.kit k where k.study_id = l.study_id and k.site_id = ${siteId}::uuid and k.kit_number = l.kit_number
					and k.status in ('on the way', 'in stock', 'given')))
			and not exists (select from closed.sealed_code c where c.study_id = l.study_id and c.kit_number = l.kit_number)
		order by l.kit_number`.execute(reader);
	return rows;
}

async function write(writer: Writer, printId: string): Promise<void> {
	const print = await writer
		.selectFrom('code_print as c')
		.innerJoin('study as s', 's.id', 'c.study_id')
		.innerJoin('site as t', 't.id', 'c.site_id')
		.select([
			'c.id',
			'c.study_id',
			'c.site_id',
			'c.status',
			's.code as study',
			't.code as siteCode',
			't.name as site'
		])
		.where('c.id', '=', printId)
		.executeTakeFirst();
	if (!print || print.status !== 'waiting') return;
	// One print at a time, or two would write a sheet for the same kit.
	await sql`select pg_advisory_xact_lock(hashtextextended(${`codes:${print.study_id}`}, 0))`.execute(
		writer
	);
	const { definition } = await getPublished(writer, print.study_id);
	const kits = await kitsWithoutSheet(writer, print.study_id, print.site_id);
	if (kits.length === 0)
		throw new Refusal('CONFLICT', { what: 'Every kit of this site has its sheet already.' });
	const sheets: CodeSheet[] = [];
	for (const [at, { kit, arm }] of kits.entries()) {
		const code = newCode();
		sheets.push({
			study: print.study,
			site: `${print.siteCode} ${print.site}`,
			kit,
			number: at + 1,
			of: kits.length,
			arm: definition.arms.find((each) => each.key === arm)?.name ?? arm,
			code: codeText(code)
		});
		await writer
			.insertInto('closed.sealed_code')
			.values({
				id: newId(),
				study_id: print.study_id,
				print_id: print.id,
				kit_number: kit,
				code_hash: hashOfCode(print.study_id, kit, code)
			})
			.execute();
	}
	const pdf = await renderCodeSheets(sheets, clock.now());
	const { key, sealed } = seal(pdf);
	const place = `sealed-codes/${print.id}`;
	await closedArea(closedConfig().folder).put(place, sealed, 'application/octet-stream');
	await writer
		.insertInto('closed.code_sheet')
		.values({
			print_id: print.id,
			study_id: print.study_id,
			storage_key: place,
			file_key: key,
			sha256: sha256Of(pdf)
		})
		.execute();
	await writer
		.updateTable('code_print')
		.set({ status: 'made', kits: kits.length })
		.where('id', '=', print.id)
		.execute();
}

/** What an open record may say of a failure on the closed side: that there was one. */
function closedFault(thrown: unknown, printId: string): Error {
	if (thrown instanceof Refusal) return thrown;
	log.error({ errorName: (thrown as Error)?.name, print: printId }, 'sealed codes');
	return new Error('The sheets could not be made.');
}

export async function sealedCodesJob({
	payload: { printId, jobRunId },
	lastTry
}: Delivery<'sealed-codes'>): Promise<void> {
	try {
		await supervised(jobRunId, lastTry, async ({ progress }) => {
			await progress(0.2, 'Writing the sheets.');
			await change(systemActor(jobRunId), 'job.read', {}, (writer) => write(writer, printId)).catch(
				(thrown: unknown) => {
					throw closedFault(thrown, printId);
				}
			);
		});
	} catch (thrown) {
		if (lastTry || thrown instanceof Refusal)
			await change(systemActor(jobRunId), 'job.read', {}, (writer) =>
				writer
					.updateTable('code_print')
					.set({ status: 'failed' })
					.where('id', '=', printId)
					.where('status', '=', 'waiting')
					.execute()
			);
		throw thrown;
	}
}

/** The sheets, for who may print them; that they were taken stands in the trail, in the same transaction. */
export const readCodeSheets = async (
	actor: Actor,
	studyId: string,
	printId: string
): Promise<Buffer> => {
	const siteId = await read(actor, 'code.print', { studyId }, async (reader) => {
		const print = await reader
			.selectFrom('code_print')
			.select(['site_id', 'status'])
			.where('study_id', '=', studyId)
			.where('id', '=', printId)
			.executeTakeFirst();
		if (!print) throw new Refusal('NOT_FOUND');
		if (print.status !== 'made') throw new Refusal('REPORT_NOT_READY');
		return print.site_id;
	});
	return change(actor, 'code.print', { studyId, siteId }, async (writer) => {
		const { rows } = await sql<{ storage_key: string; file_key: Buffer; sha256: string }>`
			select * from closed.open_codes(${printId}::uuid)`.execute(writer);
		const item = rows[0];
		const { closedFolder } = config();
		if (!item || closedFolder === null) throw new Refusal('NOT_FOUND');
		const pdf = unseal(await closedArea(closedFolder).get(item.storage_key), item.file_key);
		if (sha256Of(pdf) !== item.sha256)
			throw new Error('The sheets are not what was recorded of them');
		return pdf;
	});
};
