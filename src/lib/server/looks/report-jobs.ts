import { lookReport } from '$lib/report';
import { Refusal } from '$lib/refusal';
import { clock } from '$lib/time/clock';
import { systemActor } from '../actor';
import { change, read } from '../change';
import { closedConfig } from '../config';
import { supervised } from '../jobs/run';
import type { Delivery } from '../jobs/worker';
import { log } from '../log';
import { renderReport } from '../pdf/render';
import { closedArea, seal } from '../storage/closed';
import { sha256Of, storage } from '../storage/storage';
import { heldReport, type HeldReport } from './report-facts';
import { reportInput } from './report-input';
import { tellReleased } from './tell-released';

/** Pages of a file as our own renderer writes it: its objects stand open in it. */
export const pagesIn = (pdf: Buffer): number =>
	pdf.toString('latin1').match(/\/Type \/Page\b(?!s)/g)?.length ?? 0;

async function pdfOf(
	held: HeldReport,
	made: { at: Date; by: string },
	released?: { to: string; at: Date }
): Promise<Buffer> {
	const tree = lookReport(reportInput({ ...held.facts, made, ...(released ? { released } : {}) }));
	return renderReport(tree, { createdAt: released?.at ?? made.at });
}

const neutral = 'The report could not be made.';

/** What an open record may say of a failure in the closed area: that there was one. */
function closedFault(thrown: unknown, what: string, id: string): Error {
	log.error({ errorName: (thrown as Error)?.name, [what]: id }, 'closed report');
	return thrown instanceof Refusal ? thrown : new Error(neutral);
}

const find = (actorId: string, reportId: string) =>
	read(systemActor(actorId), 'job.read', {}, (reader) => heldReport(reader, reportId));

const setReport = (
	actorId: string,
	reportId: string,
	values: {
		status: 'made' | 'failed';
		storage_key?: string;
		sha256?: string;
		pages?: number;
		error: string | null;
		made_at?: Date;
	}
) =>
	change(systemActor(actorId), 'job.read', {}, (writer) =>
		writer.updateTable('report').set(values).where('id', '=', reportId).execute()
	);

async function making(
	{ payload: { reportId, jobRunId }, lastTry }: Delivery<'report' | 'closed-report'>,
	work: (held: HeldReport, made: { at: Date; by: string }) => Promise<void>,
	spoken: (thrown: unknown) => unknown
): Promise<void> {
	try {
		await supervised(jobRunId, lastTry, async (supervision) => {
			try {
				await supervision.progress(0.1, 'Gathering what the report prints.');
				const held = await find(jobRunId, reportId);
				if (held.status === 'made') return;
				await supervision.progress(0.3, 'Writing the pages.');
				await work(held, { at: clock.now(), by: held.madeBy });
			} catch (thrown) {
				throw spoken(thrown);
			}
		});
	} catch (thrown) {
		if (lastTry || thrown instanceof Refusal)
			await setReport(jobRunId, reportId, {
				status: 'failed',
				error: thrown instanceof Refusal ? thrown.message : neutral
			});
		throw thrown;
	}
	const run = await read(systemActor(jobRunId), 'job.read', {}, (reader) =>
		reader.selectFrom('job_run').select('status').where('id', '=', jobRunId).executeTakeFirst()
	);
	if (run?.status === 'cancelled')
		await setReport(jobRunId, reportId, { status: 'failed', error: 'The report was cancelled.' });
}

export const reportJob = (delivery: Delivery<'report'>): Promise<void> =>
	making(
		delivery,
		async (held, made) => {
			const pdf = await pdfOf(held, made);
			const key = `reports/${held.id}.pdf`;
			await (await storage()).put(key, pdf, 'application/pdf');
			await setReport(delivery.payload.jobRunId, held.id, {
				status: 'made',
				storage_key: key,
				sha256: sha256Of(pdf),
				pages: pagesIn(pdf),
				error: null,
				made_at: made.at
			});
		},
		(thrown) => thrown
	);

/** Sealed before it is written down; the key lies in the closed schema, in the same transaction as the record. */
export const closedReportJob = (delivery: Delivery<'closed-report'>): Promise<void> =>
	making(
		delivery,
		async (held, made) => {
			const pdf = await pdfOf(held, made);
			const { key, sealed } = seal(pdf);
			const place = `closed-reports/${held.id}`;
			await closedArea(closedConfig().folder).put(place, sealed, 'application/octet-stream');
			await change(systemActor(delivery.payload.jobRunId), 'job.read', {}, async (writer) => {
				await writer
					.insertInto('closed.closed_report')
					.values({
						report_id: held.id,
						study_id: held.studyId,
						storage_key: place,
						file_key: key,
						sha256: sha256Of(pdf)
					})
					.execute();
				await writer
					.updateTable('report')
					// No hash and no number of pages: whoever could guess the arms would find the guess confirmed.
					.set({ status: 'made', error: null, made_at: made.at })
					.where('id', '=', held.id)
					.execute();
			});
		},
		(thrown) => closedFault(thrown, 'report', delivery.payload.reportId)
	);

interface Release {
	id: string;
	reportId: string;
	studyId: string;
	person: { id: string; name: string };
	approvedAt: Date;
}

/** An approved release that has no copy yet; null when there is nothing left to do. */
const findRelease = (releaseId: string) =>
	read(systemActor(releaseId), 'job.read', {}, async (reader): Promise<Release | null> => {
		const row = await reader
			.selectFrom('release')
			.innerJoin('person', 'person.id', 'release.person_id')
			.select([
				'release.id',
				'release.report_id',
				'release.study_id',
				'release.status',
				'release.approved_at',
				'person.id as person_id',
				'person.name'
			])
			.where('release.id', '=', releaseId)
			.executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		if (row.status === 'ready' || row.approved_at === null) return null;
		return {
			id: row.id,
			reportId: row.report_id,
			studyId: row.study_id,
			person: { id: row.person_id, name: row.name },
			approvedAt: row.approved_at
		};
	});

async function releasing(
	{ payload: { releaseId }, lastTry }: Delivery<'release' | 'closed-release'>,
	keep: (release: Release, pdf: Buffer) => Promise<void>,
	spoken: (thrown: unknown) => unknown
): Promise<void> {
	try {
		const release = await findRelease(releaseId);
		if (!release) return;
		const held = await find(releaseId, release.reportId);
		if (held.madeAt === null) throw new Refusal('REPORT_NOT_READY');
		const pdf = await pdfOf(
			held,
			{ at: held.madeAt, by: held.madeBy },
			{ to: release.person.name, at: release.approvedAt }
		);
		await keep(release, pdf);
	} catch (thrown) {
		if (lastTry || thrown instanceof Refusal)
			await change(systemActor(releaseId), 'job.read', {}, (writer) =>
				writer
					.updateTable('release')
					.set({ status: 'failed' })
					.where('id', '=', releaseId)
					.where('status', '=', 'approved')
					.execute()
			);
		throw spoken(thrown);
	}
}

export const releaseJob = (delivery: Delivery<'release'>): Promise<void> =>
	releasing(
		delivery,
		async (release, pdf) => {
			const key = `releases/${release.id}.pdf`;
			await (await storage()).put(key, pdf, 'application/pdf');
			await change(systemActor(release.id), 'job.read', {}, async (writer) => {
				await writer
					.updateTable('release')
					.set({ status: 'ready', storage_key: key, sha256: sha256Of(pdf) })
					.where('id', '=', release.id)
					.execute();
				await tellReleased(writer, release.studyId, release.person.id);
			});
		},
		(thrown) => thrown
	);

export const closedReleaseJob = (delivery: Delivery<'closed-release'>): Promise<void> =>
	releasing(
		delivery,
		async (release, pdf) => {
			const { key, sealed } = seal(pdf);
			const place = `released-copies/${release.id}`;
			await closedArea(closedConfig().folder).put(place, sealed, 'application/octet-stream');
			await change(systemActor(release.id), 'job.read', {}, async (writer) => {
				await writer
					.insertInto('closed.released_copy')
					.values({
						release_id: release.id,
						study_id: release.studyId,
						person_id: release.person.id,
						storage_key: place,
						file_key: key,
						sha256: sha256Of(pdf)
					})
					.execute();
				await writer
					.updateTable('release')
					.set({ status: 'ready' })
					.where('id', '=', release.id)
					.execute();
				await tellReleased(writer, release.studyId, release.person.id);
			});
		},
		(thrown) => closedFault(thrown, 'release', delivery.payload.releaseId)
	);
