import { fail } from '@sveltejs/kit';
import { getJob } from '$lib/domain/job/job.reads.server';
import { getLook, type WholeLook } from '$lib/domain/look/look.reads.server';
import {
	approveRelease,
	makeReport,
	releaseReport
} from '$lib/domain/report/report.commands.server';
import { approveInput, releaseInput } from '$lib/domain/report/report.input';
import { findReport } from '$lib/domain/report/report.reads.server';
import { getStudy } from '$lib/domain/study/study.reads.server';
import { lookReport, type ReportNode } from '$lib/report';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { reportInput } from '$lib/server/looks/report-input';
import { may } from '$lib/server/permission';
import { readForm } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

interface Part {
	title: string;
	nodes: ReportNode[];
}

/** The report's parts, each under its heading; what stands before the first heading of its own is left to the page. */
function parts(nodes: readonly ReportNode[]): Part[] {
	const found: Part[] = [];
	for (const node of nodes)
		if (node.kind === 'heading' && node.level === 1) found.push({ title: node.text, nodes: [] });
		else found.at(-1)?.nodes.push(node);
	return found;
}

async function shown(actor: Actor, studyId: string, look: WholeLook) {
	if (!look.result || !look.inputHash) return null;
	const study = await getStudy(actor, studyId);
	const tree = lookReport(
		reportInput({
			study: { name: study.name, code: study.code, training: study.training },
			cut: look.cut,
			look: { number: look.number, planned: look.planned },
			result: look.result,
			inputHash: look.inputHash,
			made: { at: new Date(look.finishedAt ?? look.requestedAt), by: look.requestedBy }
		})
	);
	return { cautions: tree.cover.cautions, parts: parts(tree.body) };
}

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const scope = { studyId: params.study };
	return serve(async () => {
		const look = await getLook(actor, params.study, params.look);
		if (!look.open) return { closed: { number: look.number }, look: null };
		const { result, ...head } = look;
		const [tree, found, job] = await Promise.all([
			shown(actor, params.study, look),
			findReport(actor, params.study, params.look),
			look.jobRunId ? getJob(actor, look.jobRunId) : null
		]);
		return {
			closed: null,
			look: { ...head, words: result?.words.model ?? null, measure: result?.words.measure ?? null },
			tree,
			...found,
			job,
			reportJob: found.report?.jobRunId ? await getJob(actor, found.report.jobRunId) : null,
			allowed: {
				make: may(actor.grants, 'report.make', scope),
				release: may(actor.grants, 'report.release', scope),
				approve: may(actor.grants, 'report.approve-release', scope)
			}
		};
	});
};

const refused = (thrown: unknown) => {
	if (thrown instanceof Refusal)
		return fail(thrown.status, { said: Object.values(thrown.fields)[0] ?? thrown.message });
	throw thrown;
};

export const actions: Actions = {
	report: async (event) => {
		try {
			await makeReport(actorOf(event), event.params.study, event.params.look);
		} catch (thrown) {
			return refused(thrown);
		}
		return { done: 'The report is being made.' };
	},
	release: async (event) => {
		const sent = await readForm(event.request);
		const input = releaseInput.safeParse({ people: sent.getAll('people').map(String) });
		if (!input.success) return fail(400, { said: 'Choose at least one board member.' });
		const actor = actorOf(event);
		try {
			const { report } = await findReport(actor, event.params.study, event.params.look);
			if (!report) throw new Refusal('NOT_FOUND');
			await releaseReport(actor, event.params.study, report.id, input.data);
			return {
				done:
					report.kind === 'open'
						? 'Released: each person’s copy is being made.'
						: 'Asked for: a second person approves the release.'
			};
		} catch (thrown) {
			return refused(thrown);
		}
	},
	approve: async (event) => {
		const input = approveInput.safeParse(Object.fromEntries(await readForm(event.request)));
		if (!input.success) return fail(400, { said: 'Choose a release of the list.' });
		try {
			await approveRelease(actorOf(event), event.params.study, input.data.releaseId);
		} catch (thrown) {
			return refused(thrown);
		}
		return { done: 'Approved: the copy is being made.' };
	}
};
