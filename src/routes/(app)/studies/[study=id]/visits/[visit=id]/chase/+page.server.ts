import { redirect } from '@sveltejs/kit';
import { declareMissed, logContact } from '$lib/domain/visit/chase.commands.server';
import { getChase } from '$lib/domain/visit/chase.reads.server';
import {
	contactOutcomes,
	contactWays,
	declareMissedForm,
	logContactForm
} from '$lib/domain/visit/visit.input';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import { clock } from '$lib/time/clock';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import { dateInZone, instantFromLocal, timeInZone } from '$lib/time/zones';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	return serve(async () => {
		const { visit, left, contacts, contact } = await getChase(actor, params.study, params.visit);
		const now = clock.now();
		return {
			visit: {
				id: visit.id,
				subjectId: visit.subjectId,
				number: visit.number,
				name: visit.name,
				status: visit.status,
				window: visit.window,
				today: visit.today,
				site: visit.site.name,
				zone: visit.site.zone,
				missedReason: visit.missedReason
			},
			left,
			latest: visit.window ? shortDateText(visit.window.latest) : null,
			contacts,
			contact,
			ways: contactWays,
			outcomes: contactOutcomes,
			contactForm: await formFor(
				logContactForm,
				{
					way: 'telephone',
					// Nothing is chosen for the person.
					outcome: '' as never,
					onDate: dateInZone(now, visit.site.zone),
					onTime: timeInZone(now, visit.site.zone),
					nextStep: '',
					tryAgainOn: ''
				},
				'contact'
			),
			missedForm: await formFor(declareMissedForm, { reason: '', version: visit.version }, 'missed')
		};
	});
};

export const actions: Actions = {
	contact: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const answer = await submit(
			request,
			logContactForm,
			async ({ onDate, onTime, ...rest }) => {
				const zone = (await getChase(actor, params.study, params.visit)).visit.site.zone;

				const told = instantFromLocal(plainDateOf(onDate), onTime, zone);
				await logContact(actor, params.study, params.visit, {
					...rest,
					at: told.toISOString()
				});
			},
			'contact'
		);
		if ('status' in answer) return answer;
		redirect(303, `/studies/${params.study}/visits/${params.visit}/chase?done=logged`);
	},
	missed: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const answer = await submit(
			request,
			declareMissedForm,
			async ({ version, ...input }) => {
				await declareMissed(actor, params.study, params.visit, version, input);
			},
			'missed'
		);
		if ('status' in answer) return answer;
		redirect(303, `/studies/${params.study}/visits/${params.visit}/chase?done=missed`);
	}
};
