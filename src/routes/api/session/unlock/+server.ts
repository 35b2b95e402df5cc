import { json, type RequestHandler } from '@sveltejs/kit';
import { z } from 'zod';
import { Refusal } from '$lib/refusal';
import { fieldErrors } from '$lib/server/api/fields';
import { readJson } from '$lib/server/api/body';
import { fault, problem } from '$lib/server/api/problem';
import { unlockSession } from '$lib/server/auth/session';

const body = z.strictObject({ password: z.string().min(1, 'Enter your password.').max(256) });

/** Apart from the other endpoints: a locked screen has no actor yet, and this is what gives it one again. */
export const POST: RequestHandler = async ({ request, locals }) => {
	try {
		const actor = locals.lockedActor ?? locals.actor;
		if (!actor) throw new Refusal('NOT_SIGNED_IN');
		const given = body.safeParse(await readJson(request));
		if (!given.success) throw new Refusal('INVALID', {}, fieldErrors(given.error));
		if (!(await unlockSession(actor, given.data.password)))
			throw new Refusal('INVALID', {}, { password: 'That is not your password.' });
		return json({ locked: false }, { headers: { 'cache-control': 'no-store' } });
	} catch (thrown) {
		return thrown instanceof Refusal
			? problem(thrown, locals.requestId)
			: fault(thrown, locals.requestId);
	}
};
