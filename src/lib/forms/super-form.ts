import { onDestroy } from 'svelte';
import { get } from 'svelte/store';
import { page } from '$app/stores';
import {
	superForm as plainSuperForm,
	type SuperForm,
	type SuperValidated
} from 'sveltekit-superforms';
import type { FormMessage } from '$lib/server/forms';
import { onlyVersionDiffers } from './typed';

interface Fault {
	message?: string;
	errorId?: string;
}

type Data = Record<string, unknown>;
type Given = SuperValidated<Data, FormMessage>;

const isForm = (value: unknown): value is Given =>
	typeof value === 'object' && value !== null && 'valid' in value && 'posted' in value;

/**
 * When another form of the page is sent, the page's data are read again; what was typed here and not sent yet must
 * outlast that. An untouched form takes what the server says now. A touched one keeps its text, and takes the new version
 * only while the server's values of its own fields are the ones it began with: otherwise it is refused as stale, as it should.
 */
function keepTyped(made: SuperForm<Data, FormMessage>, given: Given): void {
	let known = given;
	let place: string | null = null;
	onDestroy(
		page.subscribe(({ data, url }) => {
			const moved = place !== null && url.pathname !== place;
			place = url.pathname;
			const fresh = Object.values((data ?? {}) as Data).find(
				(each): each is Given => isForm(each) && each.id === get(made.formId)
			);
			if (!fresh || fresh === known) return;
			if (moved || get(made.submitting) || !made.isTainted()) {
				made.reset({ data: fresh.data, newState: fresh.data, keepMessage: true });
				known = fresh;
			} else if (onlyVersionDiffers(known.data, fresh.data)) {
				made.form.update((now) => ({ ...now, version: fresh.data.version }), { taint: false });
				known = fresh;
			}
		})
	);
}

/**
 * A form that also says so when the server fails or cannot be reached: what was typed stays, and the message at its top tells
 * what happened and the number to give the administrator. It keeps what is typed while the rest of the page changes.
 */
export const superForm = ((form: never, options: Record<string, unknown> = {}) => {
	const made = plainSuperForm(form, {
		applyAction: 'never',
		onError({
			result,
			message
		}: {
			result: { error: Fault };
			message: { set(m: FormMessage): void };
		}) {
			const { message: said, errorId } = result.error;
			message.set({
				kind: 'refused',
				text: errorId
					? `${said ?? 'Something went wrong on our side.'} What you typed is kept. Tell the administrator this number: ${errorId}.`
					: 'The server could not be reached, or did not answer as expected. What you typed is kept: try again.'
			});
		},
		...options
	} as never);
	if (isForm(form)) keepTyped(made as unknown as SuperForm<Data, FormMessage>, form);
	return made;
}) as unknown as typeof plainSuperForm;
