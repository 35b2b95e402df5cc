import { redirect } from '@sveltejs/kit';
import { invitePerson } from '$lib/domain/person/person.commands.server';
import { inviteInput } from '$lib/domain/person/person.input';
import { listPeople } from '$lib/domain/person/person.reads.server';
import { config } from '$lib/server/config';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import { clock } from '$lib/time/clock';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, url }) => {
	const actor = actorOf({ locals });
	const find = (url.searchParams.get('find') ?? '').trim().slice(0, 100).replaceAll('\u0000', '');
	const [first, form] = await Promise.all([
		serve(() => listPeople(actor, { limit: 50, find: find || undefined })),
		formFor(inviteInput)
	]);
	return {
		find,
		first,
		form,
		mail: config().mail !== null,
		today: clock.now().toISOString().slice(0, 10)
	};
};

export const actions: Actions = {
	invite: (event) =>
		submit(event.request, inviteInput, async (input) => {
			const id = await invitePerson(actorOf(event), input);
			redirect(303, `/people/${id}`);
		})
};
