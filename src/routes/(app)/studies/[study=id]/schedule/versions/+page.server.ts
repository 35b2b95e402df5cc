import { error } from '@sveltejs/kit';
import { differences } from '$lib/domain/study/differences';
import { findVersions, getVersion } from '$lib/domain/study/version.reads.server';
import { getStudy } from '$lib/domain/study/study.reads.server';
import { actorOf, serve } from '$lib/server/serve';
import { shortDateText } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const [versions, study] = await serve(() =>
		Promise.all([findVersions(actor, params.study), getStudy(actor, params.study)])
	);
	const asked = (name: string, otherwise: number | undefined) => {
		const text = url.searchParams.get(name);
		const found = text === null ? otherwise : /^\d{1,6}$/.test(text) ? Number(text) : undefined;
		if (text !== null && !versions.some(({ number }) => number === found))
			error(404, { message: 'There is no such version.', code: 'NOT_FOUND' });
		return found;
	};
	const to = asked('to', versions[0]?.number);
	const from = asked('from', versions.find(({ number }) => number < (to ?? 0))?.number);
	const told =
		from === undefined || to === undefined
			? null
			: await serve(async () =>
					differences(
						...(await Promise.all([
							getVersion(actor, params.study, from),
							getVersion(actor, params.study, to)
						]))
					)
				);
	return {
		code: study.code,
		name: study.name,
		versions: versions.map(({ number, status, publishedAt, publishedBy }) => ({
			number,
			words:
				status === 'draft'
					? 'draft'
					: `published ${publishedAt ? shortDateText(dateInZone(publishedAt, 'UTC')) : ''} (UTC) by ${publishedBy ?? ''}`
		})),
		from,
		to,
		told
	};
};
