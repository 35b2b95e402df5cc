import { stringify } from 'csv-stringify/sync';
import { sql } from 'kysely';
import { accessAt } from '$lib/domain/person/person.reads.server';
import { roleNames } from '$lib/domain/person/roles';
import { Refusal } from '$lib/refusal';
import { countTry } from '$lib/server/auth/throttle';
import { change } from '$lib/server/change';
import { actorOf, serve } from '$lib/server/serve';
import { clock } from '$lib/time/clock';
import { addDays, findPlainDate } from '$lib/time/dates';
import type { RequestHandler } from './$types';

/** Who held which role at the end of a day (UTC), or now for today. Taking the list out stands in the trail. */
export const GET: RequestHandler = async ({ locals, url }) => {
	const actor = actorOf({ locals });
	const rows = await serve(async () => {
		const on = findPlainDate(url.searchParams.get('on') ?? '');
		if (!on) throw new Refusal('INVALID', {}, { on: 'Enter a date that exists.' });
		await countTry('export', actor.personId);
		const now = clock.now();
		const end = new Date(new Date(`${addDays(on, 1)}T00:00:00Z`).getTime() - 1);
		const at = end < now ? end : now;
		await change(actor, 'person.manage', {}, (writer) =>
			sql`select audit.act('access_list', null, null, null, null, ${JSON.stringify({ at: at.toISOString() })}::jsonb)`.execute(
				writer
			)
		);
		return (await accessAt(actor, at)).map((row) => ({
			at: at.toISOString(),
			name: row.name,
			email: row.email,
			account: row.active ? 'in use' : 'switched off',
			role: row.role ? roleNames[row.role] : '',
			study: row.study ?? '',
			site: row.site ?? '',
			first_day: row.valid_from ?? '',
			last_day: row.valid_to ?? '',
			granted_by: row.granted_by ?? '',
			granted_at: row.granted_at?.toISOString() ?? '',
			confirmed_by: row.confirmed_by ?? '',
			in_force: row.in_force ? 'yes' : 'no'
		}));
	});
	return new Response(
		stringify(rows, { header: true, escape_formulas: true, record_delimiter: 'windows' }),
		{
			headers: {
				'content-type': 'text/csv; charset=utf-8',
				'content-disposition': 'attachment; filename="access.csv"',
				'cache-control': 'no-store'
			}
		}
	);
};
