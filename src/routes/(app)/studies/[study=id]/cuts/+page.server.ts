import { fail } from '@sveltejs/kit';
import { z } from 'zod';
import { freezeCut, remakeCut } from '$lib/domain/cut/cut.commands.server';
import { cutInput } from '$lib/domain/cut/cut.input';
import { findCuts } from '$lib/domain/cut/cut.reads.server';
import { Refusal } from '$lib/refusal';
import { formFor, submit, readForm } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const scope = { studyId: params.study };
	const [cuts, form] = await Promise.all([
		serve(() => findCuts(actor, params.study)),
		formFor(cutInput, { label: '', cutOffAt: '' })
	]);
	return {
		cuts,
		form,
		mayFreeze: may(actor.grants, 'cut.make', scope),
		mayTakeOut: may(actor.grants, 'cut.export', scope)
	};
};

export const actions: Actions = {
	freeze: (event) =>
		submit(event.request, cutInput, async (input) => {
			const cut = await freezeCut(actorOf(event), event.params.study, input);
			return `Cut ${cut.number} is frozen: ${cut.subjects} subjects, ${cut.measurements} measurements.`;
		}),
	again: async (event) => {
		const id = z.uuid().safeParse((await readForm(event.request)).get('cutId'));
		if (!id.success) return fail(400, { again: null });
		try {
			const again = await remakeCut(actorOf(event), event.params.study, id.data);
			return { again };
		} catch (thrown) {
			if (thrown instanceof Refusal) return fail(thrown.status, { again: null });
			throw thrown;
		}
	}
};
