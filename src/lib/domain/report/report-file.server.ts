import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, type Writer } from '$lib/server/change';
import { config } from '$lib/server/config';
import { closedArea, unseal } from '$lib/server/storage/closed';
import { sha256Of, storage } from '$lib/server/storage/storage';

/** One item handed out by a function of the closed schema: where it lies and the key that opens that one file. */
interface Opened {
	storage_key: string;
	file_key: Buffer;
	sha256: string;
}

async function opened(item: Opened | undefined): Promise<Buffer> {
	if (!item) throw new Refusal('NOT_RELEASED');
	const { closedFolder } = config();
	if (closedFolder === null)
		throw new Error('The closed storage area is not known to this process');
	return checked(
		unseal(await closedArea(closedFolder).get(item.storage_key), item.file_key),
		item.sha256
	);
}

/** A file that is no longer what was recorded is never handed out. */
function checked(bytes: Buffer, sha256: string | null): Buffer {
	if (sha256Of(bytes) !== sha256) throw new Error('A stored report is not what was recorded of it');
	return bytes;
}

const openFile = async (key: string | null, sha256: string | null): Promise<Buffer> => {
	if (key === null) throw new Refusal('REPORT_NOT_READY');
	return checked(await (await storage()).get(key), sha256);
};

/** The report as made, for the statisticians; a closed one for the independent statistician alone, and logged. */
export const readReportFile = (actor: Actor, studyId: string, lookId: string): Promise<Buffer> =>
	change(actor, 'report.read', { studyId }, async (writer) => {
		const report = await writer
			.selectFrom('report')
			.select(['id', 'kind', 'status', 'storage_key', 'sha256'])
			.where('look_id', '=', lookId)
			.where('study_id', '=', studyId)
			.executeTakeFirst();
		if (!report) throw new Refusal('NOT_FOUND');
		if (report.status !== 'made') throw new Refusal('REPORT_NOT_READY');
		if (report.kind === 'closed') {
			const { rows } =
				await sql<Opened>`select * from closed.open_report(${report.id}::uuid)`.execute(writer);
			return opened(rows[0]);
		}
		await sql`select audit.act('report', ${report.id}, ${studyId}::uuid, null, null, '{"read": true}')`.execute(
			writer
		);
		return openFile(report.storage_key, report.sha256);
	});

async function ownRelease(writer: Writer, actor: Actor, studyId: string, reportId: string) {
	const release = await writer
		.selectFrom('release')
		.innerJoin('report', 'report.id', 'release.report_id')
		.select([
			'release.id',
			'release.status',
			'release.storage_key',
			'release.sha256',
			'report.kind'
		])
		.where('release.report_id', '=', reportId)
		.where('release.study_id', '=', studyId)
		.where('release.person_id', '=', actor.personId)
		.executeTakeFirst();
	if (!release) throw new Refusal('NOT_RELEASED');
	if (release.status !== 'ready') throw new Refusal('REPORT_NOT_READY');
	return release;
}

/** A board member's own copy. That it was taken is written down in the same transaction, or it is not given. */
export const downloadCopy = (actor: Actor, studyId: string, reportId: string): Promise<Buffer> =>
	change(actor, 'board.download', { studyId }, async (writer) => {
		const release = await ownRelease(writer, actor, studyId, reportId);
		let file: Buffer;
		if (release.kind === 'closed') {
			const { rows } =
				await sql<Opened>`select * from closed.open_copy(${release.id}::uuid)`.execute(writer);
			file = await opened(rows[0]);
		} else file = await openFile(release.storage_key, release.sha256);
		await writer
			.insertInto('download')
			.values({
				id: newId(),
				study_id: studyId,
				report_id: reportId,
				person_id: actor.personId,
				// The closed copy's hash stands beside it in the closed schema; here it could confirm a guess of the arms.
				sha256: release.kind === 'closed' ? null : sha256Of(file)
			})
			.execute();
		return file;
	});
