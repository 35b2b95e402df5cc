import type { PlainDate } from '$lib/time/dates';
import { timeInZone } from '$lib/time/zones';
import { openSpans, overlap, spanOf, type Closure, type TimeSpan } from '../schedule/booking';
import type { OpeningHours } from '../study/definition';

const stepMinutes = 15;

export interface FreeTime {
	/** 'HH:MM' on the site's wall; the first where it comes twice. */
	time: string;
	start: Date;
}

/**
 * Starts at which a visit of that length fits into the opening hours and meets nothing that is taken, a quarter of an hour
 * apart from each opening, none before `now`.
 */
export function freeTimes(given: {
	opening: readonly OpeningHours[];
	closures: readonly Closure[];
	zone: string;
	date: PlainDate;
	minutes: number;
	taken: readonly TimeSpan[];
	now: Date;
}): FreeTime[] {
	const { opening, closures, zone, date, minutes, taken, now } = given;
	const found = new Map<string, FreeTime>();
	for (const open of openSpans(opening, zone, date, closures))
		for (
			let span = spanOf(open.start, minutes);
			span.end <= open.end;
			span = spanOf(new Date(span.start.getTime() + stepMinutes * 60_000), minutes)
		) {
			if (span.start <= now || taken.some((each) => overlap(each, span))) continue;
			const time = timeInZone(span.start, zone);
			if (!found.has(time)) found.set(time, { time, start: span.start });
		}
	return [...found.values()];
}
