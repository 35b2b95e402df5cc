import { sql } from 'kysely';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { pageOf, type Page, type PageQuery } from '$lib/server/api/page';
import { read, readOwn, type Reader } from '$lib/server/change';
import { config } from '$lib/server/config';
import { may } from '$lib/server/permission';
import { isOver, type JobProgress, type JobRow } from './job';

/** Jobs of the look worker: what they say about themselves stays on the closed side. */
const closedQueues: readonly string[] = [
	'allocation-list',
	'by-arm-look',
	'closed-report',
	'closed-release',
	'sealed-codes'
];

const jobs = (reader: Reader) =>
	reader
		.selectFrom('job_run as j')
		.innerJoin('person as p', 'p.id', 'j.requested_by')
		.leftJoin('study as s', 's.id', 'j.study_id')
		.select([
			'j.id',
			'j.queue',
			'j.title',
			'j.study_id',
			's.code as study',
			'j.status',
			'j.fraction',
			'j.message',
			'j.error',
			'j.attempts',
			'j.cancel_asked',
			'j.requested_by',
			'p.name as requested_by_name',
			'j.created_at',
			'j.finished_at'
		]);

type Found = Awaited<ReturnType<ReturnType<typeof jobs>['executeTakeFirstOrThrow']>>;

/** An administrator keeps the machine running; what a job found or why it failed is for the study's people. */
const seesAll = (actor: Actor, job: Found) =>
	job.requested_by === actor.personId ||
	(job.study_id !== null &&
		may(actor.grants, closedQueues.includes(job.queue) ? 'look.by-arm' : 'study.read', {
			studyId: job.study_id
		}));

function told(actor: Actor, job: Found): JobRow {
	const open = seesAll(actor, job) || !closedQueues.includes(job.queue);
	return {
		id: job.id,
		queue: job.queue,
		title: job.title,
		study: job.study,
		status: job.status,
		fraction: job.fraction,
		message: open ? job.message : '',
		error: open ? job.error : job.error && 'Only the independent statistician sees why.',
		cancelAsked: job.cancel_asked,
		mayCancel:
			!isOver(job.status) &&
			!job.cancel_asked &&
			(job.requested_by === actor.personId || may(actor.grants, 'job.read', {})),
		requestedBy: job.requested_by_name,
		attempts: job.attempts,
		createdAt: job.created_at.toISOString(),
		finishedAt: job.finished_at?.toISOString() ?? null
	};
}

/** Every job, newest first, for the administrator. */
export const listJobs = (actor: Actor, page: PageQuery): Promise<Page<JobRow>> =>
	read(actor, 'job.read', {}, async (reader) => {
		const rows = await jobs(reader)
			.$if(page.cursor !== undefined, (q) => q.where('j.id', '<', page.cursor as string))
			.orderBy('j.id', 'desc')
			.limit(page.limit + 1)
			.execute();
		const found = pageOf(rows, page.limit, (row) => row.id);
		return { ...found, items: found.items.map((job) => told(actor, job)) };
	});

/** One job's progress, for who asked for it, the study's people and the administrator. */
export const getJob = (actor: Actor, jobId: string): Promise<JobProgress> =>
	readOwn(actor, async (reader) => {
		const job = await jobs(reader).where('j.id', '=', jobId).executeTakeFirst();
		if (!job || !(seesAll(actor, job) || may(actor.grants, 'job.read', {})))
			throw new Refusal('NOT_FOUND');
		const { id, title, status, fraction, message, error, cancelAsked, mayCancel } = told(
			actor,
			job
		);
		return { id, title, status, fraction, message, error, cancelAsked, mayCancel };
	});

export interface MailState {
	/** Whether a mail server is set up at all. */
	set: boolean;
	waiting: number;
	sent: number;
	failed: number;
	/** Nobody to send to: these are called or written to. */
	noAddress: number;
	doubtful: number;
}

/** How many mails are in which state; to whom they go is not the administrator's business. */
export const mailState = (actor: Actor): Promise<MailState> =>
	read(actor, 'job.read', {}, async (reader) => {
		const { rows } = await sql<{
			status: string;
			mails: string;
		}>`select * from app.mail_state()`.execute(reader);
		const of = (...statuses: string[]) =>
			rows
				.filter((row) => statuses.includes(row.status))
				.reduce((sum, row) => sum + Number(row.mails), 0);
		return {
			set: config().mail !== null,
			waiting: of('waiting', 'sending'),
			sent: of('sent'),
			failed: of('failed'),
			noAddress: of('no address'),
			doubtful: of('doubtful')
		};
	});
