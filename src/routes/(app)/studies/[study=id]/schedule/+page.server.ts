import { redirect } from '@sveltejs/kit';
import { createAmendment } from '$lib/domain/amendment/amendment.commands.server';
import { amendmentInput, publishAmendmentForm } from '$lib/domain/amendment/amendment.input';
import { findAmends } from '$lib/domain/amendment/amends.reads.server';
import { checkDefinition, mayPublish } from '$lib/domain/study/check';
import { editDraftVisit, publishProtocol } from '$lib/domain/study/study.commands.server';
import { editVisitForm, publishInput } from '$lib/domain/study/study.input';
import { getProtocol, getStudy } from '$lib/domain/study/study.reads.server';
import { planVisits } from '$lib/domain/schedule/window';
import {
	armsWords,
	measureWords,
	openingWords,
	strataWords,
	targetWords,
	widthWords
} from '$lib/domain/study/words';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import { clock } from '$lib/time/clock';
import { shortDateText } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const scope = { studyId: params.study };
	const [protocol, study] = await serve(() =>
		Promise.all([getProtocol(actor, params.study), getStudy(actor, params.study)])
	);
	const { definition } = protocol;
	const findings = checkDefinition(definition);
	const editable = protocol.status === 'draft' && may(actor.grants, 'study.edit', scope);
	const edited = editable
		? definition.visits.find((visit) => visit.key === url.searchParams.get('visit'))
		: undefined;
	// Every anchor on the same day, so that the three dates can be read side by side.
	const example = dateInZone(clock.now(), definition.sites[0]?.zone ?? 'UTC');
	const planned = planVisits(definition, { enrolment: example, randomisation: example });
	return {
		code: study.code,
		name: study.name,
		protocol: {
			number: protocol.number,
			status: protocol.status,
			version: protocol.version,
			published: protocol.publishedAt
				? `${shortDateText(dateInZone(protocol.publishedAt, 'UTC'))} (UTC) by ${protocol.publishedBy ?? ''}`
				: null
		},
		example: shortDateText(example),
		visits: planned.map(({ visit, window }) => ({
			key: visit.key,
			name: visit.name,
			lengthMinutes: visit.lengthMinutes,
			target: targetWords(visit, definition.visits),
			width: widthWords(visit),
			dates: window && {
				earliest: shortDateText(window.earliest),
				target: shortDateText(window.target),
				latest: shortDateText(window.latest)
			},
			measures: definition.schedule[visit.key] ?? []
		})),
		measures: definition.measures.map((measure) => ({
			key: measure.key,
			name: measure.name,
			primary: measure.key === definition.primaryMeasure,
			source: 'limitsSource' in measure ? (measure.limitsSource ?? null) : null,
			...measureWords(measure)
		})),
		arms: armsWords(definition),
		strata: strataWords(definition),
		masked: definition.masked,
		plannedSubjects: definition.plannedSubjects ?? null,
		sites: definition.sites.map((site) => ({
			code: site.code,
			name: site.name,
			zone: site.zone,
			opening: openingWords(site.openingHours),
			rooms: site.rooms.map((room) => room.name).join(', ')
		})),
		eligibility: definition.eligibility,
		eligibilitySigned: definition.eligibilitySigned ?? false,
		consentVersions: definition.consentVersions.map((version) => ({
			version: version.version,
			name: version.name,
			from: shortDateText(version.from)
		})),
		characteristics: definition.characteristics.map((each) => each.name),
		findings: findings.map(({ weight, path, problem }) => ({ weight, path, say: problem.message })),
		editable,
		mayPublish:
			protocol.status === 'draft' && may(actor.grants, 'study.publish', scope)
				? mayPublish(findings)
				: null,
		mayAmend: protocol.status === 'published' && may(actor.grants, 'study.edit', scope),
		amend: await formFor(amendmentInput, { summary: '' }, 'amend'),
		amends:
			protocol.status === 'draft' && protocol.number > 1
				? await serve(() => findAmends(actor, params.study))
				: null,
		publishAmendment: await formFor(
			publishAmendmentForm,
			{ approvedOn: '', reconsent: '', reconsentBy: '', version: protocol.version },
			'publishAmendment'
		),
		publish: await formFor(publishInput, { version: protocol.version }, 'publish'),
		edit: edited
			? {
					name: edited.name,
					before: edited.before.unit,
					after: edited.after.unit,
					form: await formFor(
						editVisitForm,
						{
							key: edited.key,
							name: edited.name,
							lengthMinutes: edited.lengthMinutes,
							before: edited.before.amount,
							after: edited.after.amount,
							version: protocol.version
						},
						'edit'
					)
				}
			: null
	};
};

export const actions: Actions = {
	publish: async ({ request, locals, params }) =>
		submit(
			request,
			publishInput,
			async ({ version }) => {
				await publishProtocol(actorOf({ locals }), params.study, version);
				return 'Published. The study is open.';
			},
			'publish'
		),
	amend: async ({ request, locals, params }) =>
		submit(
			request,
			amendmentInput,
			async (data) => {
				const { number } = await createAmendment(actorOf({ locals }), params.study, data);
				return `Version ${number} is a draft now. Change it, then publish it.`;
			},
			'amend'
		),
	publishAmendment: async ({ request, locals, params }) =>
		submit(
			request,
			publishAmendmentForm,
			async ({ version, ...answers }) => {
				const { followed, jobRunId } = await publishProtocol(
					actorOf({ locals }),
					params.study,
					version,
					answers
				);
				if (jobRunId) return 'Published. The subjects follow it one after the other.';
				return `Published. ${followed === 0 ? 'Nobody follows it yet.' : followed === 1 ? 'One subject follows it.' : `${followed} subjects follow it.`}`;
			},
			'publishAmendment'
		),
	edit: async ({ request, locals, params }) => {
		let done = false;
		const answer = await submit(
			request,
			editVisitForm,
			async ({ version, ...visit }) => {
				await editDraftVisit(actorOf({ locals }), params.study, visit, version);
				done = true;
			},
			'edit'
		);
		if (done) redirect(303, `/studies/${params.study}/schedule`);
		return answer;
	}
};
