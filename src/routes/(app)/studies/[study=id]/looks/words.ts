import type { JobStatus } from '$lib/domain/job/job';

/** How far a look is, with the tag that says so. */
export const lookWords: Record<JobStatus, { text: string; tag: string }> = {
	waiting: { text: 'waiting', tag: 'tag-soon' },
	running: { text: 'being fitted', tag: 'tag-soon' },
	done: { text: 'done', tag: 'tag-kept' },
	failed: { text: 'no answer', tag: 'tag-lost' },
	cancelled: { text: 'cancelled', tag: 'tag-plain' }
};
