import { z } from 'zod';
import { correctStratum } from '$lib/domain/randomisation/stratum.commands.server';
import { exitKinds, exitMeanings } from '$lib/domain/subject/exit';
import { recordReconsent, refuseReconsent } from '$lib/domain/consent/consent.commands.server';
import { consentForm, consentInput, refuseReconsentInput } from '$lib/domain/consent/consent.input';
import { freshConsent } from '$lib/domain/consent/fresh-form';
import { getConsentSet } from '$lib/domain/consent/consent-set.reads.server';
import { findAllSites } from '$lib/domain/study/sites.server';
import { recordExit, takeBackExit } from '$lib/domain/subject/exit.commands.server';
import { getSubjectRecord } from '$lib/domain/subject/record.reads.server';
import { randomiseSubject, saveContactDetails } from '$lib/domain/subject/subject.commands.server';
import { besideFields, stratumForm, stratumFrom } from '$lib/domain/subject/subject.forms';
import {
	contactForm,
	exitForm,
	exitInput,
	takeBackInput,
	transferInput
} from '$lib/domain/subject/subject.input';
import { transferSubject } from '$lib/domain/subject/transfer.commands.server';
import { getThreadFrame } from '$lib/domain/subject/threads.reads.server';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import { clock } from '$lib/time/clock';
import type { Actions, PageServerLoad } from './$types';

const nothing = z.object({});

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	return serve(async () => {
		const [record, frame] = await Promise.all([
			getSubjectRecord(actor, params.study, params.subject),
			getThreadFrame(actor, params.study, {})
		]);
		const contact = record.contact === 'none' ? null : record.contact;
		const scope = { studyId: params.study, siteId: record.site.id };
		const consentSet = record.may.consent
			? await getConsentSet(actor, params.study, record.site)
			: null;
		const me = consentSet?.choices.explainers.find((person) => person.id === actor.personId);
		const today = record.site.today;
		const exitId = record.standing.at(-1)?.id ?? '';
		return {
			record,
			frame,
			openLabel: !record.maskedStudy,
			stratum:
				record.may.correct && record.strata.length > 0
					? await formFor(
							stratumForm(record.strata),
							{
								...Object.fromEntries(
									record.strata.map((each) => [`stratum_${each.key}`, each.level])
								),
								reason: '',
								version: record.subject.version
							},
							'stratum'
						)
					: null,
			mayBook: may(actor.grants, 'visit.book', scope),
			kinds: exitKinds
				.filter((kind) => !record.exits.includes(kind))
				.map((kind) => ({ kind, means: exitMeanings[kind] })),
			randomise: await formFor(nothing, {}, 'randomise'),
			exit: await formFor(
				exitForm,
				{ kind: '', happenedOn: record.site.today, reason: '' },
				'exit'
			),
			now: clock.now(),
			consentSet,
			consent:
				consentSet &&
				(await formFor(
					consentForm,
					freshConsent(consentSet.choices, consentSet.forms, record.site, me?.id),
					'consent'
				)),
			refuse: await formFor(
				refuseReconsentInput,
				{
					cause: record.tasks.find((task) => task.refused === null)?.cause ?? 'amendment',
					refusedOn: today,
					reason: ''
				},
				'refuse'
			),
			takeBack: await formFor(
				takeBackInput,
				{ exitId, because: 'entered by mistake', reason: '' },
				'takeBack'
			),
			otherSites: record.may.transfer
				? (await findAllSites(actor, params.study)).filter((site) => site.id !== record.site.id)
				: [],
			transfer: await formFor(
				transferInput,
				{ siteId: '', transferredOn: today, reason: '' },
				'transfer'
			),
			contact: record.may.editContact
				? await formFor(
						contactForm,
						{
							name: contact?.name ?? '',
							email: contact?.email ?? '',
							phone: contact?.phone ?? '',
							language: contact?.language === 'de' ? 'de' : 'en',
							version: contact?.version ?? 0
						},
						'contact'
					)
				: null
		};
	});
};

export const actions: Actions = {
	randomise: ({ request, locals, params }) =>
		submit(
			request,
			nothing,
			async () => {
				const { kitNumber, arm } = await randomiseSubject(
					actorOf({ locals }),
					params.study,
					params.subject
				);
				return arm === null
					? `Randomised. Give kit ${kitNumber}.`
					: `Randomised to ${arm}. Give kit ${kitNumber}.`;
			},
			'randomise'
		),
	stratum: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const { strata } = await serve(() => getSubjectRecord(actor, params.study, params.subject));
		return submit(
			request,
			stratumForm(strata),
			async (data) => {
				const { afterAllocation } = await besideFields(() =>
					correctStratum(
						actor,
						params.study,
						params.subject,
						stratumFrom(data),
						Number(data.version)
					)
				);
				return afterAllocation
					? 'Corrected as data. The allocation stays, and a deviation says so.'
					: 'Corrected.';
			},
			'stratum'
		);
	},
	exit: ({ request, locals, params }) =>
		submit(
			request,
			exitForm,
			async (data) => {
				const { visitsEnded, bookingsCancelled } = await recordExit(
					actorOf({ locals }),
					params.study,
					params.subject,
					exitInput.parse(data)
				);
				if (visitsEnded === 0) return 'Recorded. No visit changed.';
				const cancelled =
					bookingsCancelled === 0
						? ''
						: ` ${bookingsCancelled === 1 ? 'One booking is' : `${bookingsCancelled} bookings are`} cancelled.`;
				return `Recorded. ${visitsEnded === 1 ? 'One visit is' : `${visitsEnded} visits are`} not required any more.${cancelled}`;
			},
			'exit'
		),
	takeBack: ({ request, locals, params }) =>
		submit(
			request,
			takeBackInput,
			async (data) => {
				const { visitsToCome } = await takeBackExit(
					actorOf({ locals }),
					params.study,
					params.subject,
					data
				);
				return visitsToCome === 0
					? 'Taken back. No visit changed.'
					: `Taken back. ${visitsToCome === 1 ? 'One visit is' : `${visitsToCome} visits are`} to come again; book what is due.`;
			},
			'takeBack'
		),
	transfer: ({ request, locals, params }) =>
		submit(
			request,
			transferInput,
			async (data) => {
				const { visitsMoved } = await transferSubject(
					actorOf({ locals }),
					params.study,
					params.subject,
					data
				);
				return `Moved. ${visitsMoved === 1 ? 'One visit' : `${visitsMoved} visits`} to come went along; both sites are told on their Today page.`;
			},
			'transfer'
		),
	consent: ({ request, locals, params }) =>
		submit(
			request,
			consentForm,
			async (data) => {
				const { follows } = await recordReconsent(
					actorOf({ locals }),
					params.study,
					params.subject,
					consentInput.parse(data)
				);
				return `The consent is recorded; protocol version ${follows} applies.`;
			},
			'consent'
		),
	refuse: ({ request, locals, params }) =>
		submit(
			request,
			refuseReconsentInput,
			async (data) => {
				await refuseReconsent(actorOf({ locals }), params.study, params.subject, data);
				return 'The refusal is recorded; the version consented to before stays.';
			},
			'refuse'
		),
	contact: ({ request, locals, params }) =>
		submit(
			request,
			contactForm,
			async ({ version, ...contact }) => {
				await saveContactDetails(
					actorOf({ locals }),
					params.study,
					params.subject,
					contact,
					version
				);
				return 'The contact details are kept.';
			},
			'contact'
		)
};
