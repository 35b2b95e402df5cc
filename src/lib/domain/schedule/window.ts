import { addDays, addMonths, daysBetween, shortDateText, type PlainDate } from '../../time/dates';
import type { PlannedVisit, StudyDefinition, VisitOffset } from '../study/definition';

/** First and last day a visit may take place, both included, and the ideal day. */
export type VisitWindow = { earliest: PlainDate; target: PlainDate; latest: PlainDate };

/** The days visits are counted from, as far as they are known. `visits` holds the days visits really took place. */
export type Anchors = {
	enrolment?: PlainDate | null;
	randomisation?: PlainDate | null;
	visits?: Readonly<Record<string, PlainDate | null | undefined>>;
};

function move(date: PlainDate, offset: VisitOffset, sign: 1 | -1): PlainDate {
	const amount = offset.amount * sign;
	switch (offset.unit) {
		case 'day':
			return addDays(date, amount);
		case 'week':
			return addDays(date, amount * 7);
		case 'month':
			return addMonths(date, amount);
	}
}

export function anchorDate(
	visit: Pick<PlannedVisit, 'anchor'>,
	anchors: Anchors
): PlainDate | null {
	if (visit.anchor === 'enrolment') return anchors.enrolment ?? null;
	if (visit.anchor === 'randomisation') return anchors.randomisation ?? null;
	return anchors.visits?.[visit.anchor.slice('visit:'.length)] ?? null;
}

/** Edge of a window. Months are stepped from the anchor, never from the target, so that month ends do not drift. */
function edge(
	anchor: PlainDate,
	target: PlainDate,
	visit: Pick<PlannedVisit, 'target' | 'before' | 'after'>,
	side: 'before' | 'after'
): PlainDate {
	const sign = side === 'before' ? -1 : 1;
	const width = visit[side];
	if (width.unit === 'month' && visit.target.unit === 'month')
		return addMonths(anchor, visit.target.amount + sign * width.amount);
	return move(target, width, sign);
}

/** The window of a visit, or null while its anchor is not known. */
export function windowOf(
	visit: Pick<PlannedVisit, 'anchor' | 'target' | 'before' | 'after'>,
	anchors: Anchors
): VisitWindow | null {
	const anchor = anchorDate(visit, anchors);
	if (anchor === null) return null;
	const target = move(anchor, visit.target, 1);
	return {
		earliest: edge(anchor, target, visit, 'before'),
		target,
		latest: edge(anchor, target, visit, 'after')
	};
}

export type PlannedWindow = {
	visit: PlannedVisit;
	window: VisitWindow | null;
	/** Counted from another visit that has not taken place yet: it will move when that visit does. */
	provisional: boolean;
};

export function byOrder(visits: readonly PlannedVisit[]): PlannedVisit[] {
	return [...visits].sort((a, b) => a.order - b.order);
}

/**
 * Every visit of the schedule in its order, with its window as far as anchors are known. A visit counted from another
 * one takes that visit's real day, or else the day planned for it, and is then provisional.
 */
export function planVisits(
	definition: Pick<StudyDefinition, 'visits'>,
	anchors: Anchors
): PlannedWindow[] {
	const byKey = new Map(definition.visits.map((visit) => [visit.key, visit]));
	const done = new Map<string, PlannedWindow>();

	function plan(visit: PlannedVisit, following: ReadonlySet<string>): PlannedWindow {
		const known = done.get(visit.key);
		if (known) return known;
		let planned: PlannedWindow = {
			visit,
			window: windowOf(visit, anchors),
			provisional: false
		};
		if (planned.window === null && visit.anchor.startsWith('visit:')) {
			const key = visit.anchor.slice('visit:'.length);
			const other = byKey.get(key);
			// A cycle has no answer; the check before publishing names it.
			if (other && !following.has(key)) {
				const day = plan(other, new Set([...following, key])).window?.target ?? null;
				planned = {
					visit,
					window: windowOf(visit, { ...anchors, visits: { ...anchors.visits, [key]: day } }),
					provisional: day !== null
				};
			}
		}
		done.set(visit.key, planned);
		return planned;
	}

	return byOrder(definition.visits).map((visit) => plan(visit, new Set([visit.key])));
}

export type TimeLeft = {
	state: 'to-come' | 'open' | 'closing' | 'passed';
	/** To come: days until it opens. Open or closing: days until its last day (0 is today). Passed: days since. */
	days: number;
	text: string;
};

export const closingWithinDays = 3;

const inDays = (days: number) => (days === 1 ? '1 day' : `${days} days`);

/** How a window stands on `today`, in words. Derived each time, never stored. */
export function timeLeft(
	window: VisitWindow,
	today: PlainDate,
	closingWithin: number = closingWithinDays
): TimeLeft {
	if (today < window.earliest) {
		const days = daysBetween(today, window.earliest);
		return { state: 'to-come', days, text: `opens in ${inDays(days)}` };
	}
	if (today > window.latest) {
		const days = daysBetween(window.latest, today);
		return { state: 'passed', days, text: `passed ${inDays(days)} ago` };
	}
	const days = daysBetween(today, window.latest);
	const state = days <= closingWithin ? 'closing' : 'open';
	if (days === 0) return { state, days, text: 'closes today' };
	return {
		state,
		days,
		text: state === 'closing' ? `closes in ${inDays(days)}` : `${inDays(days)} left`
	};
}

/** Share of the window that has gone by on `today`: below 0 before it opens, above 1 once it has passed. */
export function shareGone(window: VisitWindow, today: PlainDate): number {
	const length = daysBetween(window.earliest, window.latest) + 1;
	return (daysBetween(window.earliest, today) + 0.5) / length;
}

export type Placement = { place: 'early' | 'in-window' | 'late'; days: number };

/** Where a visit fell: inside its window, or how many days before or after it. */
export function placementOf(window: VisitWindow, actual: PlainDate): Placement {
	if (actual < window.earliest)
		return { place: 'early', days: daysBetween(actual, window.earliest) };
	if (actual > window.latest) return { place: 'late', days: daysBetween(window.latest, actual) };
	return { place: 'in-window', days: 0 };
}

export const inWindow = (window: VisitWindow, day: PlainDate): boolean =>
	day >= window.earliest && day <= window.latest;

/** '9 Jun 2026 to 19 Jun 2026' */
export function windowText(window: VisitWindow): string {
	return window.earliest === window.latest
		? shortDateText(window.target)
		: `${shortDateText(window.earliest)} to ${shortDateText(window.latest)}`;
}
