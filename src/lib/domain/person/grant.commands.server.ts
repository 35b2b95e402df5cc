import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Writer } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { addDays, plainDateOf } from '$lib/time/dates';
import { grantState, whyNotBeside, whyNotHere, type GrantTerm } from './grant';
import type { GrantInput } from './person.input';
import { placesOf } from './person.reads.server';
import { closedRoles } from './roles';

const today = () => plainDateOf(clock.now().toISOString().slice(0, 10));

async function termsOf(writer: Writer, personId: string): Promise<GrantTerm[]> {
	const rows = await writer
		.selectFrom('person_role')
		.selectAll()
		.where('person_id', '=', personId)
		.execute();
	return rows.map((row) => ({
		role: row.role,
		studyId: row.study_id,
		validFrom: row.valid_from,
		validTo: row.valid_to,
		endedAt: row.ended_at,
		confirmed: row.confirmed_by !== null
	}));
}

/**
 * Grants a role for a study, a site or the installation, from and to a day. Roles that open closed material are in force
 * only once a second administrator has confirmed them.
 */
export async function grantRole(
	actor: Actor,
	personId: string,
	input: GrantInput
): Promise<string> {
	if (personId === actor.personId) throw new Refusal('OWN_GRANT');
	const studyId = input.studyId || null;
	const siteId = input.siteId || null;
	const validTo = input.validTo || null;
	return change(actor, 'role.grant', {}, async (writer) => {
		const here = whyNotHere(input.role, studyId, siteId);
		if (here)
			throw new Refusal(
				'ROLE_PLACE',
				{ why: here },
				{ [studyId === null ? 'studyId' : 'siteId']: here }
			);
		if (validTo !== null && validTo < input.validFrom)
			throw new Refusal('INVALID', {}, { validTo: 'The last day is before the first.' });
		// A day's grace, since it is yesterday somewhere; what was done before a grant stays without one.
		if (input.validFrom < addDays(today(), -1))
			throw new Refusal('INVALID', {}, { validFrom: 'A role is not granted for days gone by.' });
		const person = await writer
			.selectFrom('person')
			.select(['id', 'active'])
			.where('id', '=', personId)
			.where('kind', '=', 'person')
			.executeTakeFirst();
		if (!person) throw new Refusal('NOT_FOUND');
		if (studyId !== null) {
			const places = await placesOf(writer);
			if (!places.some((p) => p.study_id === studyId))
				throw new Refusal('INVALID', {}, { studyId: 'Choose a study of the list.' });
			if (siteId !== null && !places.some((p) => p.study_id === studyId && p.site_id === siteId))
				throw new Refusal('INVALID', {}, { siteId: 'Choose a site of this study.' });
		}
		const apart = whyNotBeside(
			{ role: input.role, studyId, validFrom: input.validFrom, validTo },
			await termsOf(writer, personId)
		);
		if (apart) throw new Refusal('ROLE_PAIR', { why: apart }, { role: apart });
		const id = newId();
		await writer
			.insertInto('person_role')
			.values({
				id,
				person_id: personId,
				role: input.role,
				study_id: studyId,
				site_id: siteId,
				valid_from: input.validFrom,
				valid_to: validTo,
				granted_by: actor.personId
			})
			.execute();
		return id;
	});
}

const grantOf = async (writer: Writer, personId: string, grantId: string) => {
	const grant = await writer
		.selectFrom('person_role')
		.selectAll()
		.where('id', '=', grantId)
		.where('person_id', '=', personId)
		.executeTakeFirst();
	if (!grant) throw new Refusal('NOT_FOUND');
	return grant;
};

/** The second administrator's word for a role that opens closed material. */
export const confirmGrant = (
	actor: Actor,
	personId: string,
	input: { grantId: string; version: number }
): Promise<void> =>
	change(actor, 'role.grant', {}, async (writer) => {
		const grant = await grantOf(writer, personId, input.grantId);
		if (grant.granted_by === actor.personId || personId === actor.personId)
			throw new Refusal('SECOND_PERSON');
		const state = grantState(
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
		if (!closedRoles.includes(grant.role) || state !== 'waiting')
			throw new Refusal('CONFLICT', { what: 'This role needs no confirmation.' });
		mustHaveChanged(
			await writer
				.updateTable('person_role')
				.set({ confirmed_by: actor.personId, confirmed_at: clock.now() })
				.where('id', '=', grant.id)
				.where('version', '=', input.version)
				.returning('id')
				.execute()
		);
	});

/** Ends a role: at once, or with a last day. What is over stays over. */
export const endGrant = (
	actor: Actor,
	personId: string,
	input: { grantId: string; version: number; validTo?: string | undefined }
): Promise<void> =>
	change(actor, 'role.grant', {}, async (writer) => {
		const grant = await grantOf(writer, personId, input.grantId);
		const lastDay = input.validTo || null;
		if (grant.ended_at !== null || (grant.valid_to !== null && grant.valid_to < today()))
			throw new Refusal('CONFLICT', { what: 'This role is over already.' });
		// The administrator who ended the own role last would leave nobody to grant one.
		if (grant.role === 'administrator' && personId === actor.personId)
			throw new Refusal('OWN_ACCOUNT');
		if (lastDay !== null && (lastDay < today() || lastDay < grant.valid_from))
			throw new Refusal(
				'INVALID',
				{},
				{
					validTo: 'The last day is today or later. Leave it empty to end the role at once.'
				}
			);
		mustHaveChanged(
			await writer
				.updateTable('person_role')
				.set(lastDay === null ? { ended_at: clock.now() } : { valid_to: lastDay })
				.where('id', '=', grant.id)
				.where('version', '=', input.version)
				.returning('id')
				.execute()
		);
	});
