import { redirect } from '@sveltejs/kit';
import { standing } from '$lib/domain/subject/eligibility';
import { answerEligibility, closeScreening } from '$lib/domain/subject/screening.commands.server';
import { recordConsent, withdrawConsent } from '$lib/domain/consent/consent.commands.server';
import { getScreening } from '$lib/domain/subject/screening.reads.server';
import { enrolSubject } from '$lib/domain/subject/subject.commands.server';
import {
	answersFrom,
	besideFields,
	eligibilityForm,
	enrolForm,
	enrolmentFrom
} from '$lib/domain/subject/subject.forms';
import { consentForm, consentInput, withdrawConsentInput } from '$lib/domain/consent/consent.input';
import { freshConsent } from '$lib/domain/consent/fresh-form';
import { notEnteredForm } from '$lib/domain/subject/subject.input';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const screening = await serve(() => getScreening(actor, params.study, params.screening));
	const { definition, site, answers, version } = screening;
	const { unanswered, unmet } = standing(definition, answers);
	const explainer = screening.choices.explainers.find((person) => person.id === actor.personId);
	return {
		screening: { ...screening, screenedOn: shortDateText(plainDateOf(screening.screenedOn)) },
		standing: { unanswered: unanswered.length, unmet: unmet.length },
		consent: await formFor(
			consentForm,
			freshConsent(screening.choices, screening.forms, site, explainer?.id),
			'consent'
		),
		withdraw: await formFor(
			withdrawConsentInput,
			{ consentId: '', withdrawnOn: site.today, reason: '' },
			'withdraw'
		),
		eligibility: await formFor(
			eligibilityForm(definition),
			{
				...Object.fromEntries(
					Object.entries(answers).map(([key, answer]) => [`answer_${key}`, answer])
				),
				version
			},
			'eligibility'
		),
		enrol: await formFor(enrolForm(definition), { enrolledOn: site.today, version }, 'enrol'),
		close: await formFor(notEnteredForm, { reason: '', version }, 'close')
	};
};

export const actions: Actions = {
	consent: ({ request, locals, params }) =>
		submit(
			request,
			consentForm,
			async (data) => {
				await recordConsent(
					actorOf({ locals }),
					params.study,
					params.screening,
					consentInput.parse(data)
				);
				return 'The consent is recorded.';
			},
			'consent'
		),
	withdraw: ({ request, locals, params }) =>
		submit(
			request,
			withdrawConsentInput,
			async (data) => {
				await withdrawConsent(actorOf({ locals }), params.study, params.screening, data);
				return 'The consent is marked as withdrawn and does not count any more.';
			},
			'withdraw'
		),
	eligibility: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const { definition } = await serve(() => getScreening(actor, params.study, params.screening));
		return submit(
			request,
			eligibilityForm(definition),
			async (data) => {
				await besideFields(() =>
					answerEligibility(actor, params.study, params.screening, answersFrom(data), data.version)
				);
				return 'The answers are kept.';
			},
			'eligibility'
		);
	},
	enrol: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const { definition } = await serve(() => getScreening(actor, params.study, params.screening));
		let subject = '';
		const answer = await submit(
			request,
			enrolForm(definition),
			async (data) => {
				subject = (
					await besideFields(async () =>
						enrolSubject(actor, params.study, params.screening, enrolmentFrom(data), data.version)
					)
				).id;
			},
			'enrol'
		);
		if (subject) redirect(303, `/studies/${params.study}/subjects/${subject}`);
		return answer;
	},
	close: ({ request, locals, params }) =>
		submit(
			request,
			notEnteredForm,
			async ({ reason, version }) => {
				await closeScreening(actorOf({ locals }), params.study, params.screening, reason, version);
				return 'Kept in the log as not entered.';
			},
			'close'
		)
};
