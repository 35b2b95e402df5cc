import { z } from 'zod';
import { correctStratum } from '$lib/domain/randomisation/stratum.commands.server';
import { exitKinds, exitMeanings } from '$lib/domain/subject/exit';
import { recordExit } from '$lib/domain/subject/exit.commands.server';
import { getSubjectRecord } from '$lib/domain/subject/record.reads.server';
import { randomiseSubject, saveContactDetails } from '$lib/domain/subject/subject.commands.server';
import { besideFields, stratumForm, stratumFrom } from '$lib/domain/subject/subject.forms';
import { contactForm, exitForm, exitInput } from '$lib/domain/subject/subject.input';
import { getThreadFrame } from '$lib/domain/subject/threads.reads.server';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
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
				const { visitsEnded } = await recordExit(
					actorOf({ locals }),
					params.study,
					params.subject,
					exitInput.parse(data)
				);
				return visitsEnded === 0
					? 'Recorded. No visit changed.'
					: `Recorded. ${visitsEnded === 1 ? 'One visit is' : `${visitsEnded} visits are`} not required any more.`;
			},
			'exit'
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
