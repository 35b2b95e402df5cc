import { z } from 'zod';
import { bestChance } from '$lib/domain/randomisation/allocation.input';
import { usualChance } from '$lib/domain/randomisation/allocation.server';
import { minimises } from '$lib/domain/study/allocation-method';
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

const makeForm = z.object({ bestChance: bestChance.optional() });

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const [{ record, used, job }, protocol] = await serve(() =>
		Promise.all([getAllocationState(actor, params.study), getProtocol(actor, params.study)])
	);
	return {
		record: record && { ...record, madeAt: instantText(record.madeAt, 'UTC') },
		used,
		job,
		minimises: minimises(protocol.definition),
		code: protocol.definition.code,
		randomised: isRandomised(protocol.definition),
		published: protocol.status === 'published',
		arms: armsWords(protocol.definition),
		strata: strataWords(protocol.definition),
		mayMake: may(actor.grants, 'allocation.make', { studyId: params.study }),
		form: await formFor(makeForm, minimises(protocol.definition) ? { bestChance: usualChance } : {})
	};
};

export const actions: Actions = {
	default: async ({ request, locals, params }) =>
		submit(request, makeForm, async (data) => {
			await askForList(actorOf({ locals }), params.study, data);
			return 'The list is being made.';
		})
};
