import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { may, type Capability } from '$lib/server/permission';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import { instantText } from '$lib/time/zones';
import { timeLeft, type TimeLeft } from '../schedule/window';
import { getVisit, scopeOfVisit, type VisitRow } from './visit.reads.server';

export interface ContactItem {
	id: string;
	at: string;
	way: string;
	outcome: string;
	nextStep: string | null;
	tryAgainOn: string | null;
	by: string;
}

export interface Chase {
	visit: VisitRow;
	left: TimeLeft | null;
	/** Latest first. */
	contacts: ContactItem[];
	/** How the subject is reached; null for whoever may not see it. */
	contact: { name: string; phone: string | null; email: string | null } | null;
}

/** One visit that needs chasing: what was tried so far, and how the subject is reached. */
export async function getChase(
	actor: Actor,
	studyId: string,
	visitId: string,
	capability: Capability = 'visit.chase'
): Promise<Chase> {
	const scope = await scopeOfVisit(actor, capability, studyId, visitId);
	return read(actor, capability, scope, async (reader) => {
		const visit = await getVisit(reader, studyId, visitId);
		const rows = await reader
			.selectFrom('contact_attempt as c')
			.innerJoin('person as p', 'p.id', 'c.by')
			.select(['c.id', 'c.at', 'c.way', 'c.outcome', 'c.next_step', 'c.try_again_on', 'p.name'])
			.where('c.visit_id', '=', visitId)
			.orderBy('c.at', 'desc')
			.orderBy('c.id', 'desc')
			.execute();
		const contact =
			capability === 'visit.chase' && may(actor.grants, 'contact.read', scope)
				? await reader
						.selectFrom('contact_details')
						.select(['name', 'phone', 'email'])
						.where('subject_id', '=', visit.subjectId)
						.executeTakeFirst()
				: undefined;
		return {
			visit,
			left: visit.window ? timeLeft(visit.window, visit.today) : null,
			contacts: rows.map((row) => ({
				id: row.id,
				at: instantText(row.at, visit.site.zone),
				way: row.way,
				outcome: row.outcome,
				nextStep: row.next_step,
				tryAgainOn: row.try_again_on ? shortDateText(plainDateOf(row.try_again_on)) : null,
				by: row.name
			})),
			contact: contact ?? null
		};
	});
}
