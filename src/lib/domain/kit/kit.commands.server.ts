import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, read, type Reader, type Writer } from '$lib/server/change';
import { queueMail } from '$lib/server/mail/queue-mail';
import { clock } from '$lib/time/clock';
import { readKitNumber } from '../randomisation/kit';
import { isRandomised } from '../study/definition';
import { getPublished } from '../study/study.reads.server';
import { getSite } from '../subject/site.reads.server';
import { peopleWith } from '../unmasking/notice.server';
import type { KitFateInput, KitLevelInput, KitPlanInput, SendKitsInput } from './kit.input';
import { levelErrors } from './stock';

/** From now on the study's kits are counted at its sites. Before the first kit is given, or never. */
export const planKits = (
	actor: Actor,
	studyId: string,
	{ useDays }: KitPlanInput
): Promise<{ useDays: number }> =>
	change(actor, 'kit.plan', { studyId }, async (writer) => {
		const { definition } = await getPublished(writer, studyId);
		if (!isRandomised(definition))
			throw new Refusal('RULE', { why: 'This study has one arm: there are no kits.' });
		await writer.insertInto('kit_plan').values({ study_id: studyId, use_days: useDays }).execute();
		return { useDays };
	});

/** How many kits a site holds when it is full, and at how many it is filled up. Version 0: it has no level yet. */
export const setKitLevel = (
	actor: Actor,
	studyId: string,
	{ siteId, fullStock, resupplyAt, version }: KitLevelInput
): Promise<{ version: number }> =>
	change(actor, 'kit.plan', { studyId, siteId }, async (writer) => {
		await getSite(writer, studyId, siteId);
		await mustBePlanned(writer, studyId);
		const { definition } = await getPublished(writer, studyId);
		const errors = levelErrors(definition.arms, { fullStock, resupplyAt });
		if (Object.keys(errors).length > 0) throw new Refusal('INVALID', {}, errors);
		if (version === 0) {
			await writer
				.insertInto('kit_level')
				.values({
					site_id: siteId,
					study_id: studyId,
					full_stock: fullStock,
					resupply_at: resupplyAt
				})
				.execute();
			return { version: 1 };
		}
		const now = await writer
			.selectFrom('kit_level')
			.select('full_stock')
			.where('site_id', '=', siteId)
			.executeTakeFirst();
		// With less than is there already, an arm could hold more than its part, and totals would say too much.
		if (now && fullStock < now.full_stock)
			throw new Refusal(
				'INVALID',
				{},
				{ fullStock: `It can be raised, not lowered: it is ${now.full_stock}.` }
			);
		const changed = await writer
			.updateTable('kit_level')
			.set({ full_stock: fullStock, resupply_at: resupplyAt, told_at: null })
			.where('site_id', '=', siteId)
			.where('version', '=', version)
			.returning('version')
			.execute();
		mustHaveChanged(changed);
		return { version: changed[0]?.version ?? version + 1 };
	});

async function mustBePlanned(reader: Reader, studyId: string): Promise<{ use_days: number }> {
	const plan = await reader
		.selectFrom('kit_plan')
		.select('use_days')
		.where('study_id', '=', studyId)
		.executeTakeFirst();
	if (!plan) throw new Refusal('RULE', { why: 'This study does not keep a stock of kits.' });
	return plan;
}

/** Sends a site what it takes to be full again. Which kits, the closed side chooses. */
export const sendKits = (
	actor: Actor,
	studyId: string,
	{ siteId, expiresOn }: SendKitsInput
): Promise<{ id: string; kits: number }> =>
	change(actor, 'kit.plan', { studyId, siteId }, async (writer) => {
		const site = await getSite(writer, studyId, siteId);
		await mustBePlanned(writer, studyId);
		if (expiresOn <= site.today)
			throw new Refusal('INVALID', {}, { expiresOn: 'These kits would have expired already.' });
		const id = newId();
		const { rows } = await sql<{ kits: number }>`
			select closed.send_kits(${id}::uuid, ${siteId}::uuid, ${expiresOn}::date) as kits`.execute(writer);
		return { id, kits: rows[0]?.kits ?? 0 };
	});

const siteOfRow = (
	actor: Actor,
	studyId: string,
	find: (reader: Reader) => Promise<{ site_id: string } | undefined>
): Promise<string> =>
	read(actor, 'kit.keep', { studyId }, async (reader) => {
		const found = await find(reader);
		if (!found) throw new Refusal('NOT_FOUND');
		return found.site_id;
	});

/** A delivery came in, whole; a kit of it that is damaged or missing is said afterwards, by its number. */
export async function receiveKits(
	actor: Actor,
	studyId: string,
	deliveryId: string
): Promise<{ kits: number }> {
	const siteId = await siteOfRow(actor, studyId, (reader) =>
		reader
			.selectFrom('kit_delivery')
			.select('site_id')
			.where('study_id', '=', studyId)
			.where('id', '=', deliveryId)
			.executeTakeFirst()
	);
	return change(actor, 'kit.keep', { studyId, siteId }, async (writer) => {
		const received = await writer
			.updateTable('kit_delivery')
			.set({ received_by: actor.personId, received_at: clock.now() })
			.where('id', '=', deliveryId)
			.where('received_at', 'is', null)
			.returning('kits')
			.execute();
		if (received.length === 0)
			throw new Refusal('CONFLICT', { what: 'This delivery was received already.' });
		await writer
			.updateTable('kit')
			.set({ status: 'in stock' })
			.where('study_id', '=', studyId)
			.where('delivery_id', '=', deliveryId)
			.where('status', '=', 'on the way')
			.execute();
		await writer
			.updateTable('kit_level')
			.set({ told_at: null })
			.where('site_id', '=', siteId)
			.where('told_at', 'is not', null)
			.execute();
		return { kits: received[0]?.kits ?? 0 };
	});
}

/** A kit that nobody was given is damaged or lost: it leaves the stock. */
export async function loseKit(
	actor: Actor,
	studyId: string,
	{ kitNumber, status, note }: KitFateInput
): Promise<{ kitNumber: string }> {
	const typed = readKitNumber(kitNumber);
	if (!typed.ok)
		throw new Refusal('INVALID', {}, { kitNumber: 'No kit has this number: read it again.' });
	const kit = typed.value;
	const row = (reader: Reader) =>
		reader
			.selectFrom('kit')
			.select(['site_id', 'status'])
			.where('study_id', '=', studyId)
			.where('kit_number', '=', kit);
	const siteId = await siteOfRow(actor, studyId, (reader) => row(reader).executeTakeFirst());
	return change(
		actor,
		'kit.keep',
		{ studyId, siteId },
		async (writer) => {
			const found = await row(writer).forUpdate().executeTakeFirstOrThrow();
			if (found.status !== 'in stock' && found.status !== 'on the way')
				throw new Refusal('CONFLICT', { what: `This kit is ${found.status} already.` });
			await writer
				.updateTable('kit')
				.set({ status, note })
				.where('study_id', '=', studyId)
				.where('kit_number', '=', kit)
				.execute();
			await tellLowStock(writer, studyId, siteId);
			return { kitNumber: kit };
		},
		{ reason: note }
	);
}

/** Tells the site's coordinators and the data managers, once, that the stock has come down to its re-supply level. */
export async function tellLowStock(writer: Writer, studyId: string, siteId: string): Promise<void> {
	const level = await writer
		.selectFrom('kit_level')
		.select(['resupply_at', 'told_at', sql<number>`app.kits_to_give(site_id)`.as('kits')])
		.where('site_id', '=', siteId)
		.executeTakeFirst();
	if (!level || level.told_at !== null || level.kits > level.resupply_at) return;
	const told = await writer
		.updateTable('kit_level')
		.set({ told_at: clock.now() })
		.where('site_id', '=', siteId)
		.where('told_at', 'is', null)
		.returning('site_id')
		.execute();
	if (told.length === 0) return;
	for (const personId of await peopleWith(writer, studyId, siteId, [
		'coordinator',
		'pharmacist',
		'data_manager'
	]))
		await queueMail(writer, { kind: 'kits-low', personId, studyId });
}
