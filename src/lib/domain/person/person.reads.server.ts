import { sql } from 'kysely';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { pageOf, type Page } from '$lib/server/api/page';
import { read, readOwn, type Reader } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { grantState, type GrantState } from './grant';
import type { PersonRow } from './person.input';
import { roleNames, type Role } from './roles';

export interface Place {
	study_id: string;
	study_code: string;
	study_name: string;
	site_id: string | null;
	site_code: string | null;
	site_name: string | null;
}

/** Studies and their sites by name, for the administrator who grants roles there and sees nothing else of them. */
export async function placesOf(reader: Reader): Promise<Place[]> {
	return (await sql<Place>`select * from app.places()`.execute(reader)).rows;
}

const placeWords = (places: readonly Place[], studyId: string | null, siteId: string | null) => {
	if (studyId === null) return 'whole installation';
	const study = places.find((p) => p.study_id === studyId);
	const site = siteId === null ? null : places.find((p) => p.site_id === siteId);
	return [study?.study_code ?? 'a study', site ? `site ${site.site_code} ${site.site_name}` : null]
		.filter(Boolean)
		.join(', ');
};

const today = () => clock.now().toISOString().slice(0, 10);

const grantsOf = (reader: Reader, personIds: string[]) =>
	reader
		.selectFrom('person_role as r')
		.innerJoin('person as by', 'by.id', 'r.granted_by')
		.leftJoin('person as second', 'second.id', 'r.confirmed_by')
		.selectAll('r')
		.select(['by.name as by_name', 'second.name as second_name'])
		.where('r.person_id', 'in', personIds)
		.orderBy('r.granted_at', 'desc')
		.orderBy('r.id', 'desc')
		.execute();

type FoundGrant = Awaited<ReturnType<typeof grantsOf>>[number];

const stateOf = (grant: FoundGrant): GrantState =>
	grantState(
		{
			role: grant.role,
			studyId: grant.study_id,
			validFrom: grant.valid_from,
			validTo: grant.valid_to,
			endedAt: grant.ended_at,
			confirmed: grant.confirmed_by !== null
		},
		today()
	);

const people = (reader: Reader) =>
	reader
		.selectFrom('person as p')
		.select((eb) => [
			'p.id',
			'p.name',
			'p.email',
			'p.active',
			'p.version',
			'p.created_at',
			eb
				.or([
					eb('p.password_hash', 'is not', null),
					eb.exists(
						eb.selectFrom('session as s').select('s.id').whereRef('s.person_id', '=', 'p.id')
					)
				])
				.as('has_come')
		])
		.where('p.kind', '=', 'person');

const personState = (row: { active: boolean; has_come: unknown }): PersonRow['state'] =>
	!row.active ? 'off' : row.has_come ? 'active' : 'invited';

/** Accounts in the order of their names; `find` looks in names and addresses. */
export const listPeople = (
	actor: Actor,
	query: { cursor?: string | undefined; limit: number; find?: string | undefined }
): Promise<Page<PersonRow>> =>
	read(actor, 'person.manage', {}, async (reader) => {
		const like = `%${(query.find ?? '').replace(/[\\%_]/g, '\\$&')}%`;
		const rows = await people(reader)
			.$if(Boolean(query.find), (q) =>
				q.where((eb) => eb.or([eb('p.name', 'ilike', like), eb('p.email', 'ilike', like)]))
			)
			.$if(query.cursor !== undefined, (q) =>
				q.where(
					sql<boolean>`(lower(p.name), p.id) > (select lower(c.name), c.id from app.person c where c.id = ${query.cursor}::uuid)`
				)
			)
			.orderBy(sql`lower(p.name)`)
			.orderBy('p.id')
			.limit(query.limit + 1)
			.execute();
		const page = pageOf(rows, query.limit, (row) => row.id);
		const ids = page.items.map((row) => row.id);
		const [places, grants] = await Promise.all([
			placesOf(reader),
			ids.length === 0 ? [] : grantsOf(reader, ids)
		]);
		return {
			...page,
			items: page.items.map((row) => ({
				id: row.id,
				name: row.name,
				email: row.email,
				state: personState(row),
				roles: grants
					.filter((g) => g.person_id === row.id && stateOf(g) !== 'over')
					.map((g) => {
						const state = stateOf(g);
						const said = `${roleNames[g.role]} (${placeWords(places, g.study_id, g.site_id)})`;
						return state === 'in force'
							? said
							: `${said}, ${state === 'waiting' ? 'not confirmed' : state}`;
					})
			}))
		};
	});

export interface GrantRow {
	id: string;
	role: Role;
	place: string;
	validFrom: string;
	validTo: string | null;
	endedAt: Date | null;
	state: GrantState;
	grantedBy: string;
	grantedById: string;
	grantedAt: Date;
	confirmedBy: string | null;
	version: number;
}

const grantRow =
	(places: readonly Place[]) =>
	(g: FoundGrant): GrantRow => ({
		id: g.id,
		role: g.role,
		place: placeWords(places, g.study_id, g.site_id),
		validFrom: g.valid_from,
		validTo: g.valid_to,
		endedAt: g.ended_at,
		state: stateOf(g),
		grantedBy: g.by_name,
		grantedById: g.granted_by,
		grantedAt: g.granted_at,
		confirmedBy: g.second_name,
		version: g.version
	});

/** One account with its roles and how its last invitation or reset fared. */
export const getPerson = (actor: Actor, personId: string) =>
	read(actor, 'person.manage', {}, async (reader) => {
		const person = await people(reader).where('p.id', '=', personId).executeTakeFirst();
		if (!person) throw new Refusal('NOT_FOUND');
		const [places, grants, mail, link] = await Promise.all([
			placesOf(reader),
			grantsOf(reader, [personId]),
			reader
				.selectFrom('mail')
				.select(['kind', 'status', 'error', 'created_at', 'sent_at'])
				.where('person_id', '=', personId)
				.where('kind', 'in', ['invitation', 'reset'])
				.orderBy('created_at', 'desc')
				.orderBy('id', 'desc')
				.executeTakeFirst(),
			reader
				.selectFrom('link')
				.select(['expires_at', 'used_at'])
				.where('person_id', '=', personId)
				.where('purpose', '=', 'invitation')
				.orderBy('id', 'desc')
				.executeTakeFirst()
		]);
		return {
			id: person.id,
			name: person.name,
			email: person.email,
			state: personState(person),
			version: person.version,
			since: person.created_at,
			self: person.id === actor.personId,
			grants: grants.map(grantRow(places)),
			places,
			mail: mail ?? null,
			invitation: link ?? null
		};
	});

/** One's own roles and the sessions that are open now. */
export const getAccount = (actor: Actor) =>
	readOwn(actor, async (reader) => {
		const [grants, sessions, studies, sites] = await Promise.all([
			grantsOf(reader, [actor.personId]),
			reader
				.selectFrom('session')
				.select(['id', 'method', 'started_at', 'seen_at', 'device', 'locked_at'])
				.where('person_id', '=', actor.personId)
				.where('ended_at', 'is', null)
				.orderBy('seen_at', 'desc')
				.limit(100)
				.execute(),
			reader.selectFrom('study').select(['id', 'code', 'name']).execute(),
			reader.selectFrom('site').select(['id', 'study_id', 'code', 'name']).execute()
		]);
		const places: Place[] = studies.flatMap((study) => {
			const head = { study_id: study.id, study_code: study.code, study_name: study.name };
			return [
				{ ...head, site_id: null, site_code: null, site_name: null },
				...sites
					.filter((site) => site.study_id === study.id)
					.map((site) => ({
						...head,
						site_id: site.id,
						site_code: site.code,
						site_name: site.name
					}))
			];
		});
		return { grants: grants.map(grantRow(places)), sessions };
	});

export interface AccessRow {
	person_id: string;
	name: string;
	email: string;
	active: boolean;
	role: Role | null;
	study: string | null;
	site: string | null;
	valid_from: string | null;
	valid_to: string | null;
	granted_by: string | null;
	granted_at: Date | null;
	confirmed_by: string | null;
	in_force: boolean;
}

/** Who held which role at an instant, as the audit trail tells it. */
export const accessAt = (actor: Actor, at: Date): Promise<AccessRow[]> =>
	read(
		actor,
		'person.manage',
		{},
		async (reader) =>
			(
				await sql<AccessRow>`select * from app.access_at(${at.toISOString()}::timestamptz)`.execute(
					reader
				)
			).rows
	);
