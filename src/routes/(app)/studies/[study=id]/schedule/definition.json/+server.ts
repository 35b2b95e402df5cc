import { error } from '@sveltejs/kit';
import { definitionText } from '$lib/domain/study/definition-file';
import { findVersions, getVersion } from '$lib/domain/study/version.reads.server';
import { attachment } from '$lib/server/attachment';
import { actorOf, serve } from '$lib/server/serve';
import type { RequestHandler } from './$types';

/** A version's definition as a file, from which a study can be begun again. */
export const GET: RequestHandler = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const asked = url.searchParams.get('version');
	if (asked !== null && !/^\d{1,6}$/.test(asked))
		error(404, { message: 'There is no such version.', code: 'NOT_FOUND' });
	return serve(async () => {
		const number =
			asked === null ? (await findVersions(actor, params.study))[0]?.number : Number(asked);
		const definition = await getVersion(actor, params.study, number ?? 0);
		return attachment(
			definitionText(definition),
			`${definition.code.toLowerCase()}-version-${number}.json`,
			'application/json'
		);
	});
};
