import { getUnmasking } from '$lib/domain/unmasking/unmasking.reads.server';
import { recordUnmasking, unmaskSubject } from '$lib/domain/unmasking/unmasking.commands.server';
import { outsideForm, outsideInput, unmaskForm } from '$lib/domain/unmasking/unmasking.input';
import { signingNeeds } from '$lib/server/auth/signing';
import { formFor, submit, withoutSecrets } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	return serve(async () => {
		const subject = await getUnmasking(actor, params.study, params.subject);
		return {
			subject,
			needs: subject.mayUnmask ? await signingNeeds(actor) : null,
			unmask: subject.mayUnmask ? await formFor(unmaskForm, {}, 'unmask') : null,
			outside: await formFor(
				outsideForm,
				{ kind: '', code: '', knownTo: '', happenedOn: subject.today, happenedTime: subject.time },
				'outside'
			)
		};
	});
};

export const actions: Actions = {
	/** The arm goes into this one answer: it is in no form and no address, and loading the page again does not bring it back. */
	unmask: async ({ request, locals, params }) => {
		let shown: { arm: string; subject: string } | undefined;
		const answer = withoutSecrets(
			await submit(
				request,
				unmaskForm,
				async (data) => {
					const { arm, subject } = await unmaskSubject(
						actorOf({ locals }),
						params.study,
						params.subject,
						data
					);
					shown = { arm, subject };
					return 'It is on record that you asked, when and why. The people named below were told that it happened.';
				},
				'unmask'
			)
		);
		return 'form' in answer ? { ...answer, shown } : answer;
	},
	outside: ({ request, locals, params }) =>
		submit(
			request,
			outsideForm,
			async (data) => {
				await recordUnmasking(
					actorOf({ locals }),
					params.study,
					params.subject,
					outsideInput.parse(data)
				);
				return 'Recorded. The people named below were told that it happened.';
			},
			'outside'
		)
};
