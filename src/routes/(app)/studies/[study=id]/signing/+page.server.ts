import { recordKinds, type RecordKind } from '$lib/domain/signature/signature';
import { boxValue, signForm, signFromForm } from '$lib/domain/signature/signature.input';
import { sign } from '$lib/domain/signature/signature.commands.server';
import { findWaiting } from '$lib/domain/signature/signature.reads.server';
import { isId } from '$lib/id';
import { formFor, submit, withoutSecrets } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import { besideFields } from './refused';
import type { Actions, PageServerLoad } from './$types';

/** One record alone when the address names it, else everything that waits. */
function onlyOf(query: URLSearchParams): { record: RecordKind; recordId: string } | undefined {
	const record = recordKinds.find((kind) => kind === query.get('record'));
	const recordId = query.get('id') ?? '';
	return record && isId(recordId) ? { record, recordId } : undefined;
}

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const only = onlyOf(url.searchParams);
	const waiting = await serve(() => findWaiting(actor, params.study, only));
	return {
		needs: waiting.needs,
		items: waiting.items.map((item) => ({ ...item, box: boxValue(item) })),
		alone: only !== undefined,
		form: await formFor(
			signForm,
			{ items: only ? waiting.items.map(boxValue) : [], email: '', password: '' },
			'sign'
		)
	};
};

export const actions: Actions = {
	sign: async ({ request, locals, params }) =>
		withoutSecrets(
			await submit(
				request,
				signForm,
				async (form) => {
					const { signatures } = await besideFields(() =>
						sign(actorOf({ locals }), params.study, signFromForm(form))
					);
					return signatures.length === 1 ? 'Signed.' : `${signatures.length} records signed.`;
				},
				'sign'
			)
		)
};
