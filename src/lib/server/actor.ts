import type { Grant } from '$lib/domain/person/roles';

/** Who is asking: made once a request from the session, handed to every read and command. */
export interface Actor {
	personId: string;
	name: string;
	email: string;
	sessionId: string | null;
	requestId: string;
	/** In force now. */
	grants: readonly Grant[];
	/** Heddle itself: jobs that act for nobody in particular. */
	system: boolean;
}

export const systemPersonId = '00000000-0000-7000-8000-000000000001';

export const systemActor = (requestId: string): Actor => ({
	personId: systemPersonId,
	name: 'Heddle',
	email: '',
	sessionId: null,
	requestId,
	grants: [],
	system: true
});
