/**
 * The one source of "now". Server code asks it; rules are handed the answer. Tests and the demo may set it,
 * so that what they make carries the times it claims.
 */
let offsetMs = 0;
let fixedMs: number | null = null;
let told: (() => Date | null) | null = null;

function milliseconds(instant: Date | string | number): number {
	const value = new Date(instant).getTime();
	if (Number.isNaN(value)) throw new RangeError(`Not an instant: ${String(instant)}`);
	return value;
}

export const clock = {
	/** This moment: the platform's, shifted by an offset if one is set, or the fixed one. */
	now(): Date {
		return told?.() ?? new Date(fixedMs ?? Date.now() + offsetMs);
	},

	/** For a program that does several things at once, each at a time of its own: `source` says which, or null. */
	follow(source: (() => Date | null) | null): void {
		told = source;
	},

	/** Stands still at `instant` until set again, advanced or reset. */
	set(instant: Date | string | number): void {
		fixedMs = milliseconds(instant);
	},

	/** Runs on from `instant` at the platform's pace. */
	startAt(instant: Date | string | number): void {
		offsetMs = milliseconds(instant) - Date.now();
		fixedMs = null;
	},

	/** Moves forward (or back, when negative): a fixed clock stays fixed, a running one runs on. */
	advance(ms: number): void {
		if (fixedMs === null) offsetMs += ms;
		else fixedMs += ms;
	},

	/** Whether `now` is anything but the platform's own time. */
	get moved(): boolean {
		return fixedMs !== null || offsetMs !== 0 || (told?.() ?? null) !== null;
	},

	reset(): void {
		told = null;
		offsetMs = 0;
		fixedMs = null;
	}
};
