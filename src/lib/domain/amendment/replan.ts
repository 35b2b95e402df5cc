import { planVisits, type Anchors, type VisitWindow } from '../schedule/window';
import type { StudyDefinition } from '../study/definition';
import type { VisitStatus } from '../visit/status';
import type { PlainDate } from '../../time/dates';

/** A visit as it stands before a subject follows another version. `key` ties it across versions. */
export interface StandingVisit {
	id: string;
	key: string | null;
	status: VisitStatus;
	position: number;
	window: VisitWindow | null;
	/** Not required since an earlier amendment had it no more. */
	dropped: boolean;
}

/** What becomes of one visit. What is not named stays exactly as it is. */
export type Replanned =
	| {
			what: 'follow';
			id: string;
			key: string;
			position: number;
			window: VisitWindow | null;
			revive: boolean;
	  }
	| { what: 'drop'; id: string }
	| { what: 'make'; key: string; position: number; window: VisitWindow };

/** Still to come: not begun, not settled, and its window has not closed. */
export const isToCome = (
	visit: Pick<StandingVisit, 'status' | 'window'>,
	today: PlainDate
): boolean =>
	(visit.status === 'planned' || visit.status === 'booked') &&
	(visit.window === null || visit.window.latest >= today);

/**
 * Visits still to come by the new version: windows moved, new ones made, those that it has no more dropped. What is
 * past, under way, completed or missed never changes. New visits stand after everything that stays as it was, so that
 * “earlier” means the same before and after. A new visit whose window has closed already is not made: nobody can have missed it.
 */
export function replan(
	definition: Pick<StudyDefinition, 'visits'>,
	standing: readonly StandingVisit[],
	anchors: Anchors,
	today: PlainDate
): Replanned[] {
	const moving = (visit: StandingVisit) =>
		isToCome(visit, today) || (visit.dropped && visit.status === 'not required');
	const stays = standing.filter((visit) => !moving(visit));
	const base = Math.max(0, ...stays.map((visit) => visit.position));
	const byKey = new Map(standing.flatMap((visit) => (visit.key ? [[visit.key, visit]] : [])));
	const plan: Replanned[] = [];
	const known = new Set(definition.visits.map((visit) => visit.key));
	for (const visit of standing)
		if (isToCome(visit, today) && visit.key !== null && !known.has(visit.key))
			plan.push({ what: 'drop', id: visit.id });
	planVisits(definition, anchors).forEach(({ visit, window }, at) => {
		const position = base + at + 1;
		const there = byKey.get(visit.key);
		if (!there) {
			if (window && window.latest >= today)
				plan.push({ what: 'make', key: visit.key, position, window });
			return;
		}
		if (!moving(there)) return;
		if (there.dropped && !(window && window.latest >= today)) return;
		plan.push({
			what: 'follow',
			id: there.id,
			key: visit.key,
			position,
			// Without its anchor there is no new window: the one it has stays until there is.
			window: window ?? there.window,
			revive: there.dropped
		});
	});
	return plan;
}
