import { fail, redirect } from '@sveltejs/kit';
import { largestDefinitionFile } from '$lib/domain/study/definition-file';
import { createStudyFromFile } from '$lib/domain/study/study.commands.server';
import { createFromFileInput } from '$lib/domain/study/study.input';
import { templateHeads } from '$lib/domain/study/templates.server';
import { Refusal } from '$lib/refusal';
import { readForm } from '$lib/server/forms';
import { actorOf } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals }) => {
	actorOf({ locals });
	return { templates: templateHeads, megabytes: largestDefinitionFile / 1024 / 1024 };
};

export const actions: Actions = {
	default: async (event) => {
		const actor = actorOf(event);
		const form = await readForm(event.request);
		const code = String(form.get('code') ?? '').trim();
		const back = (status: number, said: string, problems: string[] = []) =>
			fail(status, { said, problems, code });
		const file = form.get('file');
		if (!(file instanceof File) || file.size === 0) return back(400, 'Choose a file first.');
		if (file.size > largestDefinitionFile)
			return back(
				413,
				`The file is larger than ${largestDefinitionFile / 1024 / 1024} MB: it cannot be a study definition. Nothing was made.`
			);
		const input = createFromFileInput.safeParse({
			...(code ? { code } : {}),
			training: form.get('training') === 'on' ? 'true' : 'false'
		});
		if (!input.success) return back(400, input.error.issues[0]?.message ?? '');
		let studyId: string;
		try {
			({ studyId } = await createStudyFromFile(
				actor,
				new Uint8Array(await file.arrayBuffer()),
				input.data
			));
		} catch (thrown) {
			if (!(thrown instanceof Refusal)) throw thrown;
			if (thrown.code !== 'DEFINITION_FILE') return back(thrown.status, thrown.message);
			const problems = Object.entries(thrown.fields).map(([path, sentence]) =>
				path === 'file' ? sentence : `${path}: ${sentence}`
			);
			return back(
				thrown.status,
				'This file was not taken, and nothing was made.',
				problems.slice(0, 30)
			);
		}
		redirect(303, `/studies/${studyId}/setup`);
	}
};
