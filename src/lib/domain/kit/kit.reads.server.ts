import { sql } from 'kysely';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import { instantText } from '$lib/time/zones';
import { isRandomised } from '../study/definition';
import { getPublished } from '../study/study.reads.server';
import { sitesFor } from '../study/sites.server';
import { leastKits } from './stock';

export interface SiteStock {
	siteId: string;
	site: string;
	fullStock: number | null;
	resupplyAt: number | null;
	/** The fewest with which somebody may be randomised. */
	least: number | null;
	version: number;
	/** Over all arms, as everything here. */
	toGive: number;
	onTheWay: number;
	given: number;
	expired: number;
	damaged: number;
	lost: number;
	low: boolean;
	mayKeep: boolean;
}

export interface Delivery {
	id: string;
	siteId: string;
	site: string;
	number: number;
	kits: number;
	expires: string;
	sent: string;
	received: string | null;
	numbers: string[];
}

export interface KitStock {
	useDays: number | null;
	randomised: boolean;
	begun: boolean;
	sites: SiteStock[];
	deliveries: Delivery[];
}

/** The kits of the study's sites, in numbers over all arms, and what is on its way. */
export const getKitStock = (actor: Actor, studyId: string): Promise<KitStock> =>
	read(actor, 'kit.read', { studyId }, async (reader) => {
		const { definition } = await getPublished(reader, studyId);
		const plan = await reader
			.selectFrom('kit_plan')
			.select('use_days')
			.where('study_id', '=', studyId)
			.executeTakeFirst();
		const begun = await reader
			.selectFrom('subject')
			.select('id')
			.where('study_id', '=', studyId)
			.where('kit_number', 'is not', null)
			.limit(1)
			.executeTakeFirst();
		const sites = await sitesFor(reader, actor, studyId, 'kit.read');
		const ids = sites.map((site) => site.id);
		const head = {
			useDays: plan?.use_days ?? null,
			randomised: isRandomised(definition),
			begun: begun !== undefined
		};
		if (!plan || ids.length === 0) return { ...head, sites: [], deliveries: [] };
		const levels = await reader
			.selectFrom('kit_level')
			.select(['site_id', 'full_stock', 'resupply_at', 'version'])
			.where('site_id', 'in', ids)
			.execute();
		const { rows: counts } = await sql<{
			site_id: string;
			to_give: number;
			on_the_way: number;
			given: number;
			expired: number;
			damaged: number;
			lost: number;
		}>`
			select k.site_id, app.kits_to_give(k.site_id) as to_give,
				count(*) filter (where k.status = 'on the way')::int as on_the_way, count(*) filter (where k.status = 'given')::int as given,
				(count(*) filter (where k.status = 'in stock'))::int - app.kits_to_give(k.site_id) as expired,
				count(*) filter (where k.status = 'damaged')::int as damaged, count(*) filter (where k.status = 'lost')::int as lost
			from app.kit k where k.study_id = ${studyId}::uuid and k.site_id = any (${ids}) group by k.site_id`.execute(
			reader
		);
		const deliveries = await reader
			.selectFrom('kit_delivery as d')
			.innerJoin('site as t', 't.id', 'd.site_id')
			.select((eb) => [
				'd.id',
				'd.site_id',
				't.name as site',
				't.zone',
				'd.number',
				'd.kits',
				'd.expires_on',
				'd.sent_at',
				'd.received_at',
				eb
					.selectFrom('kit as k')
					.select(sql<string[]>`array_agg(k.kit_number order by k.kit_number)`.as('numbers'))
					.whereRef('k.delivery_id', '=', 'd.id')
					.as('numbers')
			])
			.where('d.study_id', '=', studyId)
			.where('d.site_id', 'in', ids)
			.orderBy('d.sent_at', 'desc')
			.orderBy('d.id', 'desc')
			.limit(50)
			.execute();
		return {
			...head,
			sites: sites.map((site): SiteStock => {
				const level = levels.find((each) => each.site_id === site.id);
				const count = counts.find((each) => each.site_id === site.id);
				const toGive = count?.to_give ?? 0;
				return {
					siteId: site.id,
					site: site.name,
					fullStock: level?.full_stock ?? null,
					resupplyAt: level?.resupply_at ?? null,
					least: level ? leastKits(definition.arms, level.full_stock) : null,
					version: level?.version ?? 0,
					toGive,
					onTheWay: count?.on_the_way ?? 0,
					given: count?.given ?? 0,
					expired: count?.expired ?? 0,
					damaged: count?.damaged ?? 0,
					lost: count?.lost ?? 0,
					low: level !== undefined && toGive <= level.resupply_at,
					mayKeep: may(actor.grants, 'kit.keep', { studyId, siteId: site.id })
				};
			}),
			deliveries: deliveries.map((row) => ({
				id: row.id,
				siteId: row.site_id,
				site: row.site,
				number: row.number,
				kits: row.kits,
				expires: shortDateText(plainDateOf(row.expires_on)),
				sent: instantText(row.sent_at, row.zone),
				received: row.received_at ? instantText(row.received_at, row.zone) : null,
				numbers: row.numbers ?? []
			}))
		};
	});

/** Sites of the actor whose stock is at its re-supply level or below. */
export const findLowStock = (
	actor: Actor,
	studyId: string
): Promise<{ site: string; toGive: number; resupplyAt: number }[]> =>
	read(actor, 'kit.read', { studyId }, async (reader) => {
		const rows = await reader
			.selectFrom('kit_level as l')
			.innerJoin('site as t', 't.id', 'l.site_id')
			.select([
				't.name as site',
				'l.resupply_at as resupplyAt',
				sql<number>`app.kits_to_give(l.site_id)`.as('toGive')
			])
			.where('l.study_id', '=', studyId)
			.orderBy('t.code')
			.execute();
		return rows.filter((row) => row.toGive <= row.resupplyAt);
	});
