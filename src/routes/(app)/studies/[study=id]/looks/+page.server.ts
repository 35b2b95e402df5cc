import { fail, redirect } from '@sveltejs/kit';
import { findCuts } from '$lib/domain/cut/cut.reads.server';
import { findLookChoices, type LookChoices } from '$lib/domain/look/choices.server';
import { requestLook } from '$lib/domain/look/look.commands.server';
import { lookInput, lookSpec, type LookSpec } from '$lib/domain/look/look.input';
import { findLooks } from '$lib/domain/look/look.reads.server';
import { findPlan, signPlan } from '$lib/domain/look/plan.server';
import { approveRelease } from '$lib/domain/report/report.commands.server';
import { approveInput } from '$lib/domain/report/report.input';
import { findWaitingReleases } from '$lib/domain/report/report.reads.server';
import { Refusal } from '$lib/refusal';
import { formFor, submit, readForm } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

/** What the sentence opens with: the study's primary measure over its own time, for everyone together. */
const opening = (choices: LookChoices | null): LookSpec => ({
	measure: choices?.primaryMeasure ?? '',
	timeUnit: choices?.timeUnits[0] ?? 'year',
	group: 'none',
	covariates: [],
	ownLevel: 'yes',
	method: 'REML',
	df: 'kenward-roger'
});

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const scope = { studyId: params.study };
	const allowed = {
		look: may(actor.grants, 'look.pooled', scope),
		arms: may(actor.grants, 'look.by-arm', scope),
		plan: may(actor.grants, 'plan.sign', scope),
		approve: may(actor.grants, 'report.approve-release', scope)
	};
	const [choices, cuts, looks, plan, waiting] = await serve(() =>
		Promise.all([
			findLookChoices(actor, params.study),
			findCuts(actor, params.study),
			findLooks(actor, params.study),
			findPlan(actor, params.study),
			allowed.approve ? findWaitingReleases(actor, params.study) : []
		])
	);
	const start =
		plan && !(plan.spec.group === 'arms' && !allowed.arms) ? plan.spec : opening(choices);
	return {
		allowed,
		choices,
		cuts: cuts.map(({ id, number, label }) => ({ value: id, label: `cut ${number}, ${label}` })),
		looks,
		plan,
		waiting,
		lookForm: await formFor(lookInput, { cutId: cuts[0]?.id ?? '', ...start }, 'look'),
		planForm: await formFor(lookSpec, opening(choices), 'plan')
	};
};

export const actions: Actions = {
	look: (event) =>
		submit(
			event.request,
			lookInput,
			async (input) => {
				const { id } = await requestLook(actorOf(event), event.params.study, input);
				redirect(303, `/studies/${event.params.study}/looks/${id}`);
			},
			'look'
		),
	plan: (event) =>
		submit(
			event.request,
			lookSpec,
			async (input) => {
				await signPlan(actorOf(event), event.params.study, input);
				return 'The plan is signed.';
			},
			'plan'
		),
	approve: async (event) => {
		const input = approveInput.safeParse(Object.fromEntries(await readForm(event.request)));
		if (!input.success) return fail(400, { said: 'Choose a release of the list.' });
		try {
			await approveRelease(actorOf(event), event.params.study, input.data.releaseId);
		} catch (thrown) {
			if (thrown instanceof Refusal) return fail(thrown.status, { said: thrown.message });
			throw thrown;
		}
		return { approved: true };
	}
};
