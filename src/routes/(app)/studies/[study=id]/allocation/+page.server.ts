import { z } from 'zod';
import {
	askForList,
	getAllocationState
} from '$lib/domain/randomisation/allocation.commands.server';
import { isRandomised } from '$lib/domain/study/definition';
import { getProtocol } from '$lib/domain/study/study.reads.server';
import { armsWords, strataWords } from '$lib/domain/study/words';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import { instantText } from '$lib/time/zones';
import type { Actions, PageServerLoad } from './$types';

const nothing = z.object({});

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const [{ record, job }, protocol] = await serve(() =>
		Promise.all([getAllocationState(actor, params.study), getProtocol(actor, params.study)])
	);
	return {
		record: record && { ...record, madeAt: instantText(record.madeAt, 'UTC') },
		job,
		randomised: isRandomised(protocol.definition),
		published: protocol.status === 'published',
		arms: armsWords(protocol.definition),
		strata: strataWords(protocol.definition),
		mayMake: may(actor.grants, 'allocation.make', { studyId: params.study }),
		form: await formFor(nothing)
	};
};

export const actions: Actions = {
	default: async ({ request, locals, params }) =>
		submit(request, nothing, async () => {
			await askForList(actorOf({ locals }), params.study);
			return 'The list is being made.';
		})
};
