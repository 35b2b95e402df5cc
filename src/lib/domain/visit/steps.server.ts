import { Refusal } from '$lib/refusal';
import { shortDateText } from '$lib/time/dates';
import { checkMove, type VisitStatus } from './status';
import type { VisitRow } from './visit.reads.server';

/** Refuses a step the visit may not take now. */
export function refuseStep(visit: VisitRow, to: VisitStatus, reason?: string): void {
	const found = checkMove(visit.status, to, { reason, window: visit.window, today: visit.today });
	if (!found) return;
	if (found.code === 'WINDOW_NOT_PASSED')
		throw new Refusal('NOT_PASSED', {
			latest: visit.window ? shortDateText(visit.window.latest) : ''
		});
	if (found.code === 'REASON_NEEDED')
		throw new Refusal('RULE', { why: found.message }, { reason: found.message });
	throw new Refusal('VISIT_STATE', { status: visit.status });
}

/** Refuses a version that is not the row's own. */
export function refuseStale(row: { version: number }, given: number): void {
	if (row.version !== given) throw new Refusal('STALE');
}
