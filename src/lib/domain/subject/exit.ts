/** Ways out of a study. They differ in what may still be collected, so none stands for another. */
export const exitKinds = [
	'intervention discontinued',
	'stopped visits',
	'consent withdrawn',
	'lost to follow-up',
	'died',
	'completed'
] as const;
export type ExitKind = (typeof exitKinds)[number];

/** What each means for the subject's record, in words for the person who chooses. */
export const exitMeanings: Record<ExitKind, string> = {
	'intervention discontinued': 'The treatment stops; the visits go on.',
	'stopped visits': 'No more visits; what was collected stays.',
	'consent withdrawn': 'Nothing more may be collected; what was collected before stays.',
	'lost to follow-up': 'No contact after attempts that are logged here.',
	died: 'The subject has died. Report it by the study’s safety route as well.',
	completed: 'All visits are over, as planned.'
};

/** Whether the subject's visits end with it. */
export const endsVisits = (kind: string): boolean => kind !== 'intervention discontinued';

/** Whether nothing more may be written down about the subject, so that a visit that was begun ends as it stands. */
export const endsCollection = (kind: string): boolean =>
	kind === 'consent withdrawn' || kind === 'died';

/** Whether mails to the subject stop at once, those that wait included. */
export const stopsMail = (kind: string): boolean => kind === 'died';

/** A visit as far as leaving touches it. */
export interface VisitStanding {
	status: string;
	latest: string | null;
	/** An appointment stands, and when it begins. */
	bookedAt: Date | null;
}

export interface ExitEffects {
	visitsEnded: number;
	bookingsCancelled: number;
	/** Cancellations of appointments that are still ahead, told to the subject. */
	mails: number;
	/** Windows that closed before that day: still to be accounted for. */
	toAccountFor: number;
	underWay: number;
}

/** Visits whose window reaches past the day end with it; those that closed before stay to be accounted for. */
export const endsWith = (visit: Pick<VisitStanding, 'status' | 'latest'>, on: string): boolean =>
	(visit.status === 'planned' || visit.status === 'booked') &&
	(visit.latest === null || visit.latest >= on);

/** What recording it will do: counted the same way before, to be shown, and by the command. */
export function effectsOf(
	kind: ExitKind,
	on: string,
	visits: readonly VisitStanding[],
	now: Date
): ExitEffects {
	if (!endsVisits(kind))
		return { visitsEnded: 0, bookingsCancelled: 0, mails: 0, toAccountFor: 0, underWay: 0 };
	const ended = visits.filter((visit) => endsWith(visit, on));
	const booked = ended.filter((visit) => visit.bookedAt !== null);
	const told = booked.filter((visit) => (visit.bookedAt as Date) > now);
	return {
		visitsEnded: ended.length,
		bookingsCancelled: booked.length,
		mails: stopsMail(kind) ? 0 : told.length,
		toAccountFor: visits.filter(
			(visit) => (visit.status === 'planned' || visit.status === 'booked') && !endsWith(visit, on)
		).length,
		underWay: visits.filter((visit) => visit.status === 'under way').length
	};
}

const many = (count: number, one: string, more: string) =>
	`${count === 1 ? 'one' : count} ${count === 1 ? one : more}`;
const capital = (text: string) => text.charAt(0).toUpperCase() + text.slice(1);

/** The effects in words, for who is about to record it; `hasAddress` is null where that may not be known. */
export function effectWords(
	kind: ExitKind,
	effects: ExitEffects,
	hasAddress: boolean | null
): string[] {
	if (!endsVisits(kind)) return ['The visits, bookings and mails go on. No more kits are given.'];
	const said: string[] = [];
	said.push(
		effects.visitsEnded === 0
			? 'No visit is to come: none changes.'
			: `${capital(many(effects.visitsEnded, 'visit to come becomes', 'visits to come become'))} not required.`
	);
	if (effects.bookingsCancelled > 0)
		said.push(
			`${capital(many(effects.bookingsCancelled, 'booking is', 'bookings are'))} cancelled.`
		);
	if (effects.mails > 0 && hasAddress !== false)
		said.push(
			`The subject gets ${effects.mails === 1 ? 'a mail' : `${effects.mails} mails`} that ${effects.mails === 1 ? 'the appointment does' : 'the appointments do'} not take place.`
		);
	if (stopsMail(kind)) said.push('No mail goes out any more; those that wait are stopped.');
	if (kind === 'consent withdrawn') said.push('Nothing more can be entered about this subject.');
	if (effects.underWay > 0)
		said.push(
			endsCollection(kind)
				? 'The visit under way can be finished as it stands.'
				: 'The visit under way is finished first, as usual.'
		);
	if (effects.toAccountFor > 0)
		said.push(
			`${capital(many(effects.toAccountFor, 'window that has passed is', 'windows that have passed are'))} still to be accounted for.`
		);
	return said;
}

/** Attempts that reached nobody. */
const unanswered = ['no answer', 'message left', 'wrong details'];

/** Attempts to reach somebody without an answer since the last one that had one; `outcomes` in the order of time. */
export function unansweredAttempts(outcomes: readonly string[]): number {
	let count = 0;
	for (const outcome of outcomes) count = unanswered.includes(outcome) ? count + 1 : 0;
	return count;
}
