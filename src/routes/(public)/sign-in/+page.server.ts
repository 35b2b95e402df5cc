import { fail, redirect } from '@sveltejs/kit';
import { AuthError } from '@auth/core/errors';
import { message, superValidate } from 'sveltekit-superforms';
import { zod4 } from 'sveltekit-superforms/adapters';
import { signInInput } from '$lib/domain/person/person.input';
import { signIn } from '$lib/server/auth/auth';
import { config } from '$lib/server/config';
import type { Actions, PageServerLoad } from './$types';

/** Only a path of our own: never another site's address. */
const ownPath = (to: string | null) => (to && /^\/(?![/\\])/.test(to) ? to : '/');

export const load: PageServerLoad = async ({ locals, url }) => {
	if (locals.session) redirect(303, '/');
	return {
		form: await superValidate({ to: ownPath(url.searchParams.get('to')) }, zod4(signInInput), {
			errors: false
		}),
		refused: url.searchParams.has('error'),
		done: url.searchParams.get('done'),
		sso: config().oidc !== null
	};
};

export const actions: Actions = {
	password: async (event) => {
		const form = await superValidate(event.request.clone(), zod4(signInInput));
		form.data.password = '';
		if (!form.valid) return fail(400, { form });
		const given = await event.request.clone().formData();
		const body = new FormData();
		body.set('providerId', 'credentials');
		body.set('email', String(given.get('email') ?? ''));
		body.set('password', String(given.get('password') ?? ''));
		body.set('redirectTo', ownPath(form.data.to));
		const request = new Request(event.request.url, {
			method: 'POST',
			headers: withoutBody(event.request.headers),
			body
		});
		try {
			await signIn({ ...event, request });
		} catch (thrown) {
			if (!(thrown instanceof AuthError)) throw thrown;
			const throttled = (thrown as { code?: string }).code === 'throttled';
			return message(
				form,
				throttled
					? 'Too many tries. Wait a quarter of an hour and try again, or have your password reset.'
					: 'The e-mail address and the password do not fit together.',
				{ status: throttled ? 429 : 400 }
			);
		}
	},
	sso: async (event) => {
		const body = new FormData();
		body.set('providerId', 'sso');
		body.set('redirectTo', '/');
		const request = new Request(event.request.url, {
			method: 'POST',
			headers: withoutBody(event.request.headers),
			body
		});
		await signIn({ ...event, request });
	}
};

/** The new request has a body of its own: the old one's length and boundary would not fit it. */
function withoutBody(headers: Headers): Headers {
	const kept = new Headers(headers);
	kept.delete('content-type');
	kept.delete('content-length');
	return kept;
}
