import { shortDateText, type PlainDate } from '../../time/dates';
import { problem, type Problem } from '../problems';
import type { VisitWindow } from '../schedule/window';

/** What is stored of a visit. Early, late, closing and passed are derived from its window and never stored. */
export const visitStatuses = [
	'planned',
	'booked',
	'under way',
	'completed',
	'missed',
	'not required'
] as const;
export type VisitStatus = (typeof visitStatuses)[number];

type Step = { to: VisitStatus; reason: boolean };

const step = (to: VisitStatus): Step => ({ to, reason: false });
const withReason = (to: VisitStatus): Step => ({ to, reason: true });

/** Steps that undo something, or that give a visit up, need a reason. */
const steps: Record<VisitStatus, readonly Step[]> = {
	planned: [step('booked'), step('under way'), withReason('missed'), withReason('not required')],
	booked: [
		withReason('planned'),
		step('under way'),
		withReason('missed'),
		withReason('not required')
	],
	// Begun by mistake: back to where it was. Begun and broken off is completed, with reasons for what was not done.
	'under way': [step('completed'), withReason('booked'), withReason('planned')],
	completed: [withReason('under way')],
	missed: [withReason('planned')],
	'not required': [withReason('planned')]
};

export const nextStatuses = (from: VisitStatus): VisitStatus[] =>
	steps[from].map((each) => each.to);

export const needsReason = (from: VisitStatus, to: VisitStatus): boolean =>
	steps[from].find((each) => each.to === to)?.reason ?? false;

/** A visit that is over, one way or the other. */
export const isSettled = (status: VisitStatus): boolean =>
	status === 'completed' || status === 'missed' || status === 'not required';

/** Why a visit may not go from one status to the other, or null. */
export function checkMove(
	from: VisitStatus,
	to: VisitStatus,
	given: { reason?: string | null; window?: VisitWindow | null; today: PlainDate }
): Problem<'VISIT_MOVE_NOT_ALLOWED' | 'REASON_NEEDED' | 'WINDOW_NOT_PASSED'> | null {
	const found = steps[from].find((each) => each.to === to);
	if (!found) return problem('VISIT_MOVE_NOT_ALLOWED', { from, to });
	// A missed visit is one whose window closed and that did not take place.
	if (to === 'missed' && given.window && given.today <= given.window.latest)
		return problem('WINDOW_NOT_PASSED', { latest: shortDateText(given.window.latest) });
	if (found.reason && !given.reason?.trim()) return problem('REASON_NEEDED');
	return null;
}
