import { redirect } from '@sveltejs/kit';
import { fieldErrors } from '$lib/server/api/fields';
import { createStudy } from '$lib/domain/study/study.commands.server';
import { createStudyForm, createStudyInput } from '$lib/domain/study/study.input';
import { findTemplate, studyTemplates, templateHeads } from '$lib/domain/study/templates.server';
import { Refusal, type FieldErrors } from '$lib/refusal';
import { formFor, submit } from '$lib/server/forms';
import { actorOf } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

/** The names people choose from; any zone that the platform knows is taken. */
const zones = Intl.supportedValuesOf('timeZone');

export const load: PageServerLoad = async ({ locals, url }) => {
	actorOf({ locals });
	const chosen =
		findTemplate(url.searchParams.get('template') ?? 'two-arm-trial') ?? studyTemplates[0];
	if (!chosen) throw new Error('There is no study template.');
	const { definition } = chosen;
	// Two rows more than the template has, for those whose browser adds none.
	const spare = ['', ''];
	return {
		templates: templateHeads,
		arms: definition.arms.length,
		zones,
		form: await formFor(createStudyForm, {
			template: chosen.key,
			code: '',
			name: '',
			masked: definition.masked,
			training: false,
			siteName: [...definition.sites.map((site) => site.name), ...spare],
			siteZone: [...definition.sites.map((site) => site.zone), ...spare],
			consentApprovedOn: definition.consentVersions[0]?.from ?? '',
			plannedSubjects: definition.plannedSubjects ?? 100
		})
	};
};

export const actions: Actions = {
	default: async ({ request, locals }) => {
		const actor = actorOf({ locals });
		let made = '';
		const answer = await submit(request, createStudyForm, async (data) => {
			const rows = data.siteName
				.map((name, at) => ({ name, zone: data.siteZone[at] ?? '', at }))
				.filter((row) => row.name !== '');
			const input = createStudyInput.safeParse({
				template: data.template,
				code: data.code,
				name: data.name,
				masked: data.masked,
				training: data.training,
				sites: rows.map(({ name, zone }) => ({ name, zone })),
				consentApprovedOn: data.consentApprovedOn,
				plannedSubjects: data.plannedSubjects
			});
			if (!input.success)
				throw new Refusal('INVALID', {}, besideRows(fieldErrors(input.error), rows));
			made = (await createStudy(actor, input.data)).studyId;
		});
		if (made) redirect(303, `/studies/${made}/setup`);
		return answer;
	}
};

/** The form has sites in two columns: what is said of a site goes beside its own row. */
function besideRows(errors: FieldErrors, rows: { at: number }[]): FieldErrors {
	return Object.fromEntries(
		Object.entries(errors).map(([path, sentence]) => {
			const site = /^sites\.(\d+)\.(name|zone)$/.exec(path);
			if (!site) return [path === 'sites' ? 'siteName[0]' : path, sentence];
			const row = rows[Number(site[1])]?.at ?? 0;
			return [`${site[2] === 'name' ? 'siteName' : 'siteZone'}[${row}]`, sentence];
		})
	);
}
