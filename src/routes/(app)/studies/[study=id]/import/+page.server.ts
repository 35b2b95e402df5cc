import { redirect } from '@sveltejs/kit';
import { fail } from '@sveltejs/kit';
import { uploadImport } from '$lib/domain/import/import.commands.server';
import { findImports } from '$lib/domain/import/import.reads.server';
import { importLimits } from '$lib/domain/import/table';
import { Refusal } from '$lib/refusal';
import { readForm } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => ({
	imports: await serve(() => findImports(actorOf({ locals }), params.study)),
	limits: { megabytes: importLimits.bytes / 1024 / 1024, ...importLimits }
});

export const actions: Actions = {
	default: async (event) => {
		const actor = actorOf(event);
		const file = (await readForm(event.request)).get('file');
		if (!(file instanceof File) || file.size === 0)
			return fail(400, { said: 'Choose a file first.' });
		if (file.size > importLimits.bytes)
			return fail(413, {
				said: new Refusal('TOO_LARGE', { limit: `${importLimits.bytes / 1024 / 1024} MB` }).message
			});
		let id: string;
		try {
			({ id } = await uploadImport(actor, event.params.study, {
				name: file.name.replace(/\p{Cc}/gu, '') || 'file.csv',
				bytes: Buffer.from(await file.arrayBuffer())
			}));
		} catch (thrown) {
			if (thrown instanceof Refusal) return fail(thrown.status, { said: thrown.message });
			throw thrown;
		}
		redirect(303, `/studies/${event.params.study}/import/${id}`);
	}
};
