import { error, type RequestEvent } from '@sveltejs/kit';
import { Refusal } from '$lib/refusal';
import type { Actor } from './actor';

/** For loads and files: a refusal becomes the error page with its own status and sentence. */
export async function serve<T>(work: () => Promise<T>): Promise<T> {
	try {
		return await work();
	} catch (thrown) {
		if (thrown instanceof Refusal)
			error(thrown.status, { message: thrown.message, code: thrown.code });
		throw thrown;
	}
}

/** The guard lets nobody without an actor this far; this says so to the type checker, and fails closed. */
export function actorOf(event: Pick<RequestEvent, 'locals'>): Actor {
	const { actor } = event.locals;
	if (!actor) error(401, { message: 'Please sign in.', code: 'NOT_SIGNED_IN' });
	return actor;
}
