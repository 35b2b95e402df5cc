import { error, redirect, type RequestEvent } from '@sveltejs/kit';
import { findLink, setPasswordByLink } from '$lib/domain/person/link.commands.server';
import { newPasswordInput } from '$lib/domain/person/person.input';
import { Refusal } from '$lib/refusal';
import { countTry } from './auth/throttle';
import { formFor, submit, withoutSecrets } from './forms';
import { serve } from './serve';

type LinkEvent = Pick<
	RequestEvent,
	'params' | 'locals' | 'setHeaders' | 'request' | 'getClientAddress'
>;

/** The address of these pages is a secret: it goes to no other page as the referrer. */
export const keepAddress = (event: Pick<LinkEvent, 'setHeaders'>) =>
	event.setHeaders({ 'referrer-policy': 'no-referrer' });

/** What a link's page shows. Looking uses nothing up. */
export async function loadLink(event: LinkEvent, purpose: 'invitation' | 'reset') {
	keepAddress(event);
	const link = await findLink(event.params.token ?? '', purpose, event.locals.requestId);
	if (!link?.person) {
		const refusal = new Refusal('BAD_LINK');
		error(refusal.status, { message: refusal.message, code: refusal.code });
	}
	return {
		name: link.person.name,
		email: link.person.email,
		form: await formFor(newPasswordInput)
	};
}

export async function choosePassword(event: LinkEvent, purpose: 'invitation' | 'reset') {
	await serve(() => countTry('address', event.getClientAddress()));
	return withoutSecrets(
		await submit(event.request, newPasswordInput, async ({ password }) => {
			await setPasswordByLink(event.params.token ?? '', purpose, password, event.locals.requestId);
			redirect(303, '/sign-in?done=password');
		})
	);
}
