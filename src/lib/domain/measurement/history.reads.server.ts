import { z } from 'zod';
import { isRole, roleNames } from '../person/roles';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { instantText } from '$lib/time/zones';
import { numberText } from '$lib/units/convert';
import { isUnit, unitText } from '$lib/units/units';
import { Refusal } from '$lib/refusal';
import { getVisit, scopeOfVisit } from '../visit/visit.reads.server';

export const historyItem = z
	.object({
		at: z.string(),
		by: z.string(),
		role: z.string(),
		what: z.string(),
		reason: z.string().nullable()
	})
	.meta({ id: 'MeasurementHistory' });
export type HistoryItem = z.output<typeof historyItem>;

/** What the trail holds of a measurement, in plain words and in order; earlier values stay readable. */
export async function getHistory(
	actor: Actor,
	studyId: string,
	visitId: string,
	measureId: string
): Promise<HistoryItem[]> {
	const scope = await scopeOfVisit(actor, 'subject.read', studyId, visitId);
	return read(actor, 'subject.read', scope, async (reader) => {
		const visit = await getVisit(reader, studyId, visitId);
		const row = await reader
			.selectFrom('measurement as n')
			.innerJoin('measure as m', 'm.id', 'n.measure_id')
			.select(['n.id', 'm.decimals'])
			.where('n.visit_id', '=', visitId)
			.where('n.measure_id', '=', measureId)
			.executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		const events = await reader
			.selectFrom('audit.event as e')
			.leftJoin('person as p', 'p.id', 'e.actor')
			.select(['e.at', 'e.role', 'e.reason', 'e.after', 'e.action', 'p.name'])
			.where('e.study_id', '=', studyId)
			.where('e.record', '=', 'measurement')
			.where('e.record_id', '=', row.id)
			.orderBy('e.id')
			.execute();
		let state: Record<string, unknown> = {};
		return events.map((event) => {
			const change = (event.after ?? {}) as Record<string, unknown>;
			state = { ...state, ...change };
			return {
				at: instantText(event.at, visit.site.zone),
				by: event.name ?? '',
				role: isRole(event.role) ? roleNames[event.role] : event.role,
				what: stateText(state, row.decimals),
				reason: event.reason
			};
		});
	});
}

function stateText(state: Record<string, unknown>, decimals: number): string {
	const { value, readings, text_value, not_done_reason, unit, entered_value, entered_unit } = state;
	const shown = typeof unit === 'string' && isUnit(unit) ? ` ${unitText(unit)}` : '';
	const parts: string[] = [];
	if (typeof value === 'number') parts.push(`${numberText(value, decimals)}${shown}`.trim());
	if (Array.isArray(readings)) parts.push(`readings ${readings.join(', ')}`);
	if (
		typeof entered_value === 'number' &&
		entered_unit !== unit &&
		typeof entered_unit === 'string'
	)
		parts.push(
			`entered as ${entered_value} ${isUnit(entered_unit) ? unitText(entered_unit) : entered_unit}`
		);
	if (typeof text_value === 'string') parts.push(text_value);
	if (typeof not_done_reason === 'string') parts.push(`not done: ${not_done_reason}`);
	if (typeof state.soft_answer === 'string') parts.push(`asked, answered: ${state.soft_answer}`);
	if (typeof state.comment === 'string') parts.push(`comment: ${state.comment}`);
	return parts.join('; ');
}
