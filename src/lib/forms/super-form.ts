import { superForm as plainSuperForm } from 'sveltekit-superforms';
import type { FormMessage } from '$lib/server/forms';

interface Fault {
	message?: string;
	errorId?: string;
}

/**
 * A form that also says so when the server fails or cannot be reached: what was typed stays, and the message at its top tells
 * what happened and the number to give the administrator.
 */
export const superForm = ((form: never, options: Record<string, unknown> = {}) =>
	plainSuperForm(form, {
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
	} as never)) as unknown as typeof plainSuperForm;
