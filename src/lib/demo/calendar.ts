import { addDays, isoWeekday, type PlainDate } from '$lib/time/dates';

/** The demo's places for visits: pairs of a room and a nurse, in quarter hours of the opening times. */
const openings = [
	[8 * 60, 12 * 60 + 30],
	[13 * 60 + 15, 17 * 60]
] as const;

const text = (minutes: number) =>
	`${String(Math.floor(minutes / 60)).padStart(2, '0')}:${String(minutes % 60).padStart(2, '0')}`;

export class Places {
	private readonly taken = new Map<string, [number, number][]>();
	constructor(private readonly pairs: number) {}

	/** The first free start from `wish` on, with the pair that has it; null when the day is full. */
	find(
		site: number,
		day: PlainDate,
		minutes: number,
		wish: number
	): { time: string; pair: number } | null {
		for (const late of [false, true])
			for (const [opens, closes] of openings)
				for (let start = opens; start + minutes <= closes; start += 15) {
					if (!late && start < wish) continue;
					for (let pair = 0; pair < this.pairs; pair++) {
						const key = `${site}|${day}|${pair}`;
						const busy = this.taken.get(key) ?? [];
						if (busy.some(([from, to]) => from < start + minutes && start < to)) continue;
						this.taken.set(key, [...busy, [start, start + minutes]]);
						return { time: text(start), pair };
					}
				}
		return null;
	}

	/** Gives a place back: an appointment was moved or cancelled. */
	free(site: number, day: PlainDate, pair: number, time: string): void {
		const [hours = 0, minutes = 0] = time.split(':').map(Number);
		const start = hours * 60 + minutes;
		const key = `${site}|${day}|${pair}`;
		this.taken.set(
			key,
			(this.taken.get(key) ?? []).filter(([from]) => from !== start)
		);
	}
}

/** The working day nearest to `day` that `fits`; null when there is none within two weeks. */
export function workingDay(day: PlainDate, fits: (day: PlainDate) => boolean): PlainDate | null {
	for (let step = 0; step <= 14; step++)
		for (const sign of step === 0 ? [1] : [1, -1]) {
			const tried = addDays(day, sign * step);
			if (isoWeekday(tried) <= 5 && fits(tried)) return tried;
		}
	return null;
}
