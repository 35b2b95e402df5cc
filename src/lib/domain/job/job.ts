export type JobStatus = 'waiting' | 'running' | 'done' | 'failed' | 'cancelled';

export const jobWords: Record<JobStatus, string> = {
	waiting: 'waiting',
	running: 'under way',
	done: 'done',
	failed: 'failed',
	cancelled: 'cancelled'
};

export const isOver = (status: JobStatus): boolean =>
	status === 'done' || status === 'failed' || status === 'cancelled';

/** A job as the API tells it: how far it is, never what it works on. */
export interface JobProgress {
	id: string;
	title: string;
	status: JobStatus;
	/** 0 to 1. */
	fraction: number;
	message: string;
	error: string | null;
	cancelAsked: boolean;
	mayCancel: boolean;
}

export interface JobRow extends JobProgress {
	queue: string;
	study: string | null;
	requestedBy: string;
	attempts: number;
	createdAt: string;
	finishedAt: string | null;
}
