import { sql } from 'kysely';
import { z } from 'zod';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import { instantText } from '$lib/time/zones';
import type { Closure } from '../schedule/booking';
import type { OpeningHours } from '../study/definition';
import { sitesFor } from '../study/sites.server';

export const siteView = z
	.object({
		id: z.string(),
		code: z.string(),
		name: z.string(),
		zone: z.string(),
		version: z.number(),
		approvedOn: z.string().nullable(),
		opening: z.array(z.object({ weekday: z.number(), opens: z.string(), closes: z.string() })),
		closures: z.array(
			z.object({
				from: z.string(),
				to: z.string(),
				reason: z.string(),
				text: z.string(),
				/** Appointments that fall on these days, for those who may move them. */
				bookings: z.array(
					z.object({ visitId: z.string(), number: z.string(), visit: z.string(), when: z.string() })
				)
			})
		)
	})
	.meta({ id: 'Site' });
export type SiteView = z.output<typeof siteView>;

const daysText = ({ from, to }: Closure) =>
	from === to
		? shortDateText(plainDateOf(from))
		: `${shortDateText(plainDateOf(from))} to ${shortDateText(plainDateOf(to))}`;

/** The sites the actor may see: approval, opening hours, closures and the appointments these meet. */
export const findSiteViews = (actor: Actor, studyId: string): Promise<SiteView[]> =>
	read(actor, 'study.read', { studyId }, async (reader) => {
		const ids = (await sitesFor(reader, actor, studyId, 'study.read')).map((site) => site.id);
		if (ids.length === 0) return [];
		const sites = await reader
			.selectFrom('site')
			.select(['id', 'code', 'name', 'zone', 'version', 'approved_on', 'opening', 'closures'])
			.where('study_id', '=', studyId)
			.where('id', 'in', ids)
			.orderBy('code')
			.execute();
		const mayMove = new Set(
			(await sitesFor(reader, actor, studyId, 'visit.book')).map((site) => site.id)
		);
		return Promise.all(
			sites.map(async (site) => {
				const closures = await Promise.all(
					(site.closures as Closure[]).map(async (closure) => {
						const met = mayMove.has(site.id)
							? await reader
									.selectFrom('appointment as a')
									.innerJoin('visit as v', 'v.id', 'a.visit_id')
									.innerJoin('subject as s', 's.id', 'v.subject_id')
									.select(['v.id', 's.number', 'v.name', 'a.starts_at'])
									.where('a.site_id', '=', site.id)
									.where('a.status', '=', 'booked')
									.where(
										sql<string>`(a.starts_at at time zone ${site.zone})::date`,
										'>=',
										closure.from
									)
									.where(
										sql<string>`(a.starts_at at time zone ${site.zone})::date`,
										'<=',
										closure.to
									)
									.orderBy('a.starts_at')
									.limit(100)
									.execute()
							: [];
						return {
							...closure,
							text: daysText(closure),
							bookings: met.map((row) => ({
								visitId: row.id,
								number: row.number,
								visit: row.name,
								when: instantText(row.starts_at, site.zone)
							}))
						};
					})
				);
				return {
					id: site.id,
					code: site.code,
					name: site.name,
					zone: site.zone,
					version: site.version,
					approvedOn: site.approved_on,
					opening: site.opening as OpeningHours[],
					closures
				};
			})
		);
	});
