import { fail, redirect } from '@sveltejs/kit';
import { mapImport, startImport } from '$lib/domain/import/import.commands.server';
import { importRequest, mappingForm, requestFrom } from '$lib/domain/import/import.input';
import { getImport, previewImport } from '$lib/domain/import/import.reads.server';
import { getJob } from '$lib/domain/job/job.reads.server';
import { findSites, getStudy } from '$lib/domain/study/study.reads.server';
import { Refusal } from '$lib/refusal';
import { fieldErrors } from '$lib/server/api/fields';
import { readForm } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import { unitCodes, unitOf } from '$lib/units/units';
import { startingForm } from './mapping-start';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const [batch, preview, sites, study] = await serve(() =>
		Promise.all([
			getImport(actor, params.study, params.batch),
			previewImport(actor, params.study, params.batch),
			findSites(actor, params.study),
			getStudy(actor, params.study)
		])
	);
	return {
		batch,
		rows: preview.rows,
		sites,
		draft: study.status === 'draft',
		masked: study.masked,
		job: batch.jobRunId ? await serve(() => getJob(actor, batch.jobRunId as string)) : null,
		start: startingForm(
			batch.columns,
			batch.mapping,
			preview.suggestion,
			batch.version,
			sites[0]?.code ?? ''
		),
		units: unitCodes.map((code) => ({
			value: code,
			label: code === '1' ? 'no unit' : unitOf(code).text
		}))
	};
};

const asked = (thrown: unknown) => {
	if (thrown instanceof Refusal) return fail(thrown.status, { said: thrown.message });
	throw thrown;
};

export const actions: Actions = {
	/** Saves the mapping and begins the check in one step: nobody saves a mapping to leave it at that. */
	map: async (event) => {
		const actor = actorOf(event);
		const { study, batch } = event.params;
		const sent = await readForm(event.request);
		const text = (name: string) => String(sent.get(name) ?? '').replaceAll('\u0000', '');
		const texts = (name: string) =>
			sent.getAll(name).map((each) => String(each).replaceAll('\u0000', ''));
		const read = mappingForm.safeParse({
			version: text('version'),
			role: texts('role'),
			name: texts('name'),
			unit: texts('unit'),
			decimals: texts('decimals'),
			timeUnit: text('timeUnit') || undefined,
			site: text('site'),
			decimalSign: text('decimalSign') || undefined,
			missing: text('missing')
		});
		if (!read.success)
			return fail(400, { said: Object.values(fieldErrors(read.error))[0] ?? 'Look at it again.' });
		try {
			const { columns } = await getImport(actor, study, batch);
			const request = requestFrom(columns, read.data);
			if (!request.ok) return fail(422, { said: request.why, kept: read.data });
			const whole = importRequest.safeParse(request.request);
			if (!whole.success)
				return fail(422, {
					said: Object.values(fieldErrors(whole.error)).join(' '),
					kept: read.data
				});
			await mapImport(actor, study, batch, read.data.version, whole.data);
			await startImport(actor, study, batch, { dryRun: true });
		} catch (thrown) {
			if (thrown instanceof Refusal)
				return fail(thrown.status, { said: thrown.message, kept: read.data });
			throw thrown;
		}
		redirect(303, `/studies/${study}/import/${batch}#check`);
	},
	run: async (event) => {
		try {
			await startImport(actorOf(event), event.params.study, event.params.batch, { dryRun: false });
		} catch (thrown) {
			return asked(thrown);
		}
		redirect(303, `/studies/${event.params.study}/import/${event.params.batch}#check`);
	}
};
