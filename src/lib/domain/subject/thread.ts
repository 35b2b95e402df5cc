import type { VisitStatus } from '../visit/status';
import type { ExitKind } from './exit';

/** One visit on a thread; places are days since the subject's anchor (or the study time turned into days). */
export interface ThreadVisit {
	id: string;
	name: string;
	position: number;
	status: VisitStatus;
	earliest: number | null;
	target: number | null;
	latest: number | null;
	/** Where it took place. */
	took: number | null;
	/** Where it is booked. */
	booked: number | null;
	/** The window's dates, for words and tables. */
	earliestOn: string | null;
	latestOn: string | null;
}

export interface ThreadRow {
	id: string;
	number: string;
	importedAs: string | null;
	site: { id: string; code: string; name: string };
	enrolledOn: string;
	randomisedOn: string | null;
	/** Null where the study's time is no calendar time. */
	today: number | null;
	exit: { kind: ExitKind; at: number | null; on: string } | null;
	visits: ThreadVisit[];
}

export interface ThreadPage {
	items: ThreadRow[];
	nextCursor: string | null;
}

/** What all threads of a study share: columns, the stretch of time shown, and how time is counted. */
export interface ThreadFrame {
	total: number;
	from: number;
	to: number;
	columns: { name: string; at: number }[];
	/** Days in one unit of the axis. */
	perUnit: number;
	axis: string;
}

export const inWindow = (visit: ThreadVisit): boolean | null =>
	visit.took === null || visit.earliest === null || visit.latest === null
		? null
		: visit.took >= visit.earliest && visit.took <= visit.latest;

const count = (n: number, what: string) => `${n} ${what}${n === 1 ? '' : 's'}`;

function visitWords(visit: ThreadVisit, today: number | null): string {
	if (visit.status === 'missed') return `${visit.name} missed`;
	if (visit.status === 'not required') return `${visit.name} not required`;
	if (visit.took !== null) {
		const inside = inWindow(visit);
		const where = inside === null ? '' : inside ? ', in its window' : ', outside its window';
		return `${visit.name} ${visit.status === 'under way' ? 'under way' : 'measured'}${where}`;
	}
	if (visit.booked !== null) return `${visit.name} booked`;
	if (today !== null && visit.latest !== null && today > visit.latest)
		return `${visit.name} not done, its window has passed`;
	if (today !== null && visit.earliest !== null && today >= visit.earliest)
		return `${visit.name} due`;
	return `${visit.name} to come`;
}

/** A thread in words, for those who do not see it. Visits to come are counted, not listed. */
export function describeThread(row: ThreadRow): string {
	const words = row.visits.map((visit) => visitWords(visit, row.today));
	const told = words.filter((text) => !text.endsWith(' to come'));
	const ahead = words.length - told.length;
	const parts = [
		...told,
		...(ahead > 0 ? [`${count(ahead, 'visit')} to come`] : []),
		...(row.exit ? [row.exit.kind] : [])
	];
	return `${row.number}: ${parts.length > 0 ? parts.join('; ') : 'no visits yet'}.`;
}

/** Where the line itself runs, in pieces: it stops at each missed visit and goes on after it. */
export function linePieces(
	row: ThreadRow,
	frame: Pick<ThreadFrame, 'from' | 'to'>
): [number, number][] {
	const gap = (frame.to - frame.from) * 0.009;
	const places = row.visits.flatMap((visit) => visit.took ?? visit.target ?? []);
	const took = row.visits.flatMap((visit) => visit.took ?? []);
	const first = Math.min(0, ...places.slice(0, 1), ...took);
	const start = Math.max(frame.from, first - gap * 1.4);
	const last = row.exit?.at ?? row.today ?? Math.max(first, ...took);
	const end = Math.min(frame.to, Math.max(last, ...took));
	const breaks = row.visits
		.filter((visit) => visit.status === 'missed' && visit.target !== null)
		.map((visit) => visit.target as number)
		.sort((a, b) => a - b);
	const pieces: [number, number][] = [];
	let from = start;
	for (const at of breaks) {
		if (at + gap <= from || at - gap >= end) continue;
		if (at - gap > from) pieces.push([from, at - gap]);
		from = at + gap;
	}
	if (end > from) pieces.push([from, end]);
	return pieces;
}

/** How many visits were measured, missed, and are open on a day past their window. */
export function tally(row: ThreadRow): { measured: number; missed: number; passed: number } {
	return {
		measured: row.visits.filter((visit) => visit.status === 'completed').length,
		missed: row.visits.filter((visit) => visit.status === 'missed').length,
		passed: row.visits.filter(
			(visit) =>
				(visit.status === 'planned' || visit.status === 'booked') &&
				visit.latest !== null &&
				row.today !== null &&
				row.today > visit.latest
		).length
	};
}

/** The next visit that is still to be done, if any. */
export const nextVisit = (row: ThreadRow): ThreadVisit | null =>
	row.visits.find((visit) => visit.status === 'planned' || visit.status === 'booked') ?? null;
