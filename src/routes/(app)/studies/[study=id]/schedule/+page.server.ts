import { redirect } from '@sveltejs/kit';
import { createAmendment } from '$lib/domain/amendment/amendment.commands.server';
import { amendmentInput } from '$lib/domain/amendment/amendment.input';
import { shownFindings } from '$lib/domain/study/shown-findings';
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

/** What came of publishing: the first version opens the study, a later one is followed by some or by nobody yet. */
function followWords(follow: string | null): string {
	if (follow === null) return 'Published. The study is open.';
	if (follow === 'many') return 'Published. The subjects follow it one after the other.';
	const count = Number(follow);
	if (!Number.isSafeInteger(count) || count <= 0) return 'Published. Nobody follows it yet.';
	return `Published. ${count === 1 ? 'One subject follows it.' : `${count} subjects follow it.`}`;
}

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const scope = { studyId: params.study };
	const [protocol, study] = await serve(() =>
		Promise.all([getProtocol(actor, params.study), getStudy(actor, params.study)])
	);
	const { definition } = protocol;
	const draft = protocol.status === 'draft';
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
		findings: draft ? shownFindings(definition) : [],
		editable: draft && may(actor.grants, 'study.edit', scope),
		mayAmend: !draft && may(actor.grants, 'study.edit', scope),
		amend: await formFor(amendmentInput, { summary: '' }, 'amend'),
		justPublished:
			!draft && url.searchParams.get('published') === 'yes'
				? followWords(url.searchParams.get('follow'))
				: null
	};
};

export const actions: Actions = {
	amend: async ({ request, locals, params }) => {
		let done = false;
		const answer = await submit(
			request,
			amendmentInput,
			async (data) => {
				await createAmendment(actorOf({ locals }), params.study, data);
				done = true;
			},
			'amend'
		);
		if (done) redirect(303, `/studies/${params.study}/setup`);
		return answer;
	}
};
