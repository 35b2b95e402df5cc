import { newId, newRandomId } from '$lib/id';
import { Refusal, type RefusalCode } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Reader, type Writer } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { isoWeekday, plainDateOf, shortDateText, type PlainDate } from '$lib/time/dates';
import { dateInZone, instantFromLocal, localTimeKind } from '$lib/time/zones';
import { checkOpening, openingText, spanOf, type TimeSpan } from '../schedule/booking';
import { inWindow } from '../schedule/window';
import { takeTurn } from '../subject/screening.commands.server';
import { staffOn } from './booking.reads.server';
import { tellSubject } from './visit-mail.server';
import { refuseStale, refuseStep } from './steps.server';
import type { BookVisitInput, CancelAppointmentInput, MoveAppointmentInput } from './visit.input';
import { holdVisit, refuseIfLeft, scopeOfVisit, type VisitRow } from './visit.reads.server';

interface Booked {
	appointmentId: string;
	/** The appointment's own version. */
	version: number;
	visitVersion: number;
	startsAt: Date;
	endsAt: Date;
}

/** Books a visit that is not booked yet. `version` is the visit's. */
export async function bookVisit(
	actor: Actor,
	studyId: string,
	visitId: string,
	version: number,
	input: BookVisitInput
): Promise<Booked> {
	const scope = await scopeOfVisit(actor, 'visit.book', studyId, visitId);
	return besideTheField(
		change(actor, 'visit.book', scope, async (writer) => {
			const visit = await holdVisit(writer, studyId, visitId);
			refuseStep(visit, 'booked');
			refuseStale(visit, version);
			await refuseIfLeft(writer, visit.subjectId);
			const span = await checkPlace(writer, visit, input);
			const id = newId();
			const appointment = await writer
				.insertInto('appointment')
				.values({
					id,
					study_id: studyId,
					site_id: visit.site.id,
					subject_id: visit.subjectId,
					visit_id: visitId,
					room_id: input.roomId,
					staff_id: input.staffId,
					starts_at: span.start,
					ends_at: span.end,
					zone: visit.site.zone,
					outside_reason: reasonOutside(visit, span, input),
					calendar_uid: newRandomId()
				})
				.returning('version')
				.executeTakeFirstOrThrow();
			const changed = await writer
				.updateTable('visit')
				.set({ status: 'booked' })
				.where('id', '=', visitId)
				.where('version', '=', version)
				.returning('version')
				.execute();
			mustHaveChanged(changed);
			await tellSubject(writer, 'visit-invitation', id);
			return {
				appointmentId: id,
				version: appointment.version,
				visitVersion: changed[0]?.version ?? version + 1,
				startsAt: span.start,
				endsAt: span.end
			};
		})
	);
}

/** Moves the open appointment: the same calendar entry, one sequence number on. `version` is the appointment's. */
export async function moveAppointment(
	actor: Actor,
	studyId: string,
	visitId: string,
	version: number,
	input: MoveAppointmentInput
): Promise<Booked> {
	const scope = await scopeOfVisit(actor, 'visit.book', studyId, visitId);
	return besideTheField(
		change(actor, 'visit.book', scope, async (writer) => {
			const visit = await holdVisit(writer, studyId, visitId);
			if (visit.status !== 'booked') throw new Refusal('VISIT_STATE', { status: visit.status });
			const open = await openAppointment(writer, visitId);
			refuseStale(open, version);
			await refuseIfLeft(writer, visit.subjectId);
			const span = await checkPlace(writer, visit, input);
			const changed = await writer
				.updateTable('appointment')
				.set({
					room_id: input.roomId,
					staff_id: input.staffId,
					starts_at: span.start,
					ends_at: span.end,
					zone: visit.site.zone,
					outside_reason: reasonOutside(visit, span, input),
					calendar_sequence: open.calendar_sequence + 1,
					changed_at: clock.now()
				})
				.where('id', '=', open.id)
				.where('version', '=', version)
				.returning('version')
				.execute();
			mustHaveChanged(changed);
			await tellSubject(writer, 'visit-moved', open.id, open.starts_at);
			return {
				appointmentId: open.id,
				version: changed[0]?.version ?? version + 1,
				visitVersion: visit.version,
				startsAt: span.start,
				endsAt: span.end
			};
		})
	);
}

/** Cancels the open appointment; the visit is to be booked again. `version` is the appointment's. */
export async function cancelAppointment(
	actor: Actor,
	studyId: string,
	visitId: string,
	version: number,
	input: CancelAppointmentInput
): Promise<{ appointmentId: string; version: number; visitVersion: number }> {
	const scope = await scopeOfVisit(actor, 'visit.book', studyId, visitId);
	return change(
		actor,
		'visit.book',
		scope,
		async (writer) => {
			const visit = await holdVisit(writer, studyId, visitId);
			if (visit.status !== 'booked') throw new Refusal('VISIT_STATE', { status: visit.status });
			const open = await openAppointment(writer, visitId);
			refuseStale(open, version);
			refuseStep(visit, 'planned', input.reason);
			const cancelled = await closeAppointment(writer, open);
			const changed = await writer
				.updateTable('visit')
				.set({ status: 'planned' })
				.where('id', '=', visitId)
				.where('version', '=', visit.version)
				.returning('version')
				.execute();
			mustHaveChanged(changed);
			return {
				appointmentId: open.id,
				version: cancelled,
				visitVersion: changed[0]?.version ?? visit.version + 1
			};
		},
		{ reason: input.reason }
	);
}

export interface OpenAppointment {
	id: string;
	version: number;
	calendar_sequence: number;
	starts_at: Date;
	ends_at: Date;
	outside_reason: string | null;
}

export async function findOpenAppointment(
	reader: Reader,
	visitId: string
): Promise<OpenAppointment | undefined> {
	return reader
		.selectFrom('appointment')
		.select(['id', 'version', 'calendar_sequence', 'starts_at', 'ends_at', 'outside_reason'])
		.where('visit_id', '=', visitId)
		.where('status', '=', 'booked')
		.executeTakeFirst();
}

async function openAppointment(reader: Reader, visitId: string): Promise<OpenAppointment> {
	const found = await findOpenAppointment(reader, visitId);
	if (!found) throw new Refusal('CONFLICT', { what: 'This visit has no appointment any more.' });
	return found;
}

/** Ends an appointment that will not be kept, one sequence number on, and tells the subject; gives its new version. */
export async function closeAppointment(writer: Writer, open: OpenAppointment): Promise<number> {
	const changed = await writer
		.updateTable('appointment')
		.set({
			status: 'cancelled',
			calendar_sequence: open.calendar_sequence + 1,
			changed_at: clock.now()
		})
		.where('id', '=', open.id)
		.where('version', '=', open.version)
		.returning('version')
		.execute();
	mustHaveChanged(changed);
	// What is over already needs no taking back.
	if (open.starts_at > clock.now()) await tellSubject(writer, 'visit-cancelled', open.id);
	return changed[0]?.version ?? open.version + 1;
}

/** For whoever settles a visit in another way: its open appointment, if any, will not be kept. */
export async function closeOpenAppointment(writer: Writer, visitId: string): Promise<void> {
	const open = await findOpenAppointment(writer, visitId);
	if (open) await closeAppointment(writer, open);
}

/** The span the form means, once everything but who else is there at the time has been checked. */
async function checkPlace(
	writer: Writer,
	visit: VisitRow,
	input: BookVisitInput
): Promise<TimeSpan> {
	const { zone, opening, closures } = visit.site;
	const date = plainDateOf(input.date);
	if (visit.window === null)
		throw new Refusal('RULE', {
			why: 'This visit has no window yet: the day it is counted from is not known.'
		});
	if (localTimeKind(date, input.time, zone) === 'skipped')
		throw refusedAt('time', `Clocks go forward on that day: there is no ${input.time}.`);
	const span = spanOf(instantFromLocal(date, input.time, zone), visit.lengthMinutes);
	if (span.start <= clock.now()) throw refusedAt('date', 'That time has passed.');
	const closed = closures.find((each) => date >= each.from && date <= each.to);
	if (closed) throw refusedAt('date', `The site is closed on that day: ${closed.reason}.`);
	if (checkOpening(span, opening, zone, closures)) {
		const open = openingText(opening, isoWeekday(date));
		const refusal = new Refusal('OUTSIDE_HOURS', { open });
		throw new Refusal('OUTSIDE_HOURS', { open }, { time: refusal.message });
	}
	if (!inWindow(visit.window, date) && input.outsideReason === '') {
		const facts = {
			day: shortDateText(date),
			earliest: shortDateText(visit.window.earliest),
			latest: shortDateText(visit.window.latest)
		};
		const sentence = new Refusal('OUTSIDE_WINDOW', facts).message;
		throw new Refusal('OUTSIDE_WINDOW', facts, { outsideReason: sentence });
	}
	await checkRoomAndStaff(writer, visit, input, date);
	// One at a time at a site: two that meet would otherwise wait for each other. The constraints still decide.
	await takeTurn(writer, 'booking', visit.site.id);
	return span;
}

async function checkRoomAndStaff(
	reader: Reader,
	visit: VisitRow,
	input: BookVisitInput,
	date: PlainDate
): Promise<void> {
	const room = await reader
		.selectFrom('room')
		.select('id')
		.where('site_id', '=', visit.site.id)
		.where('id', '=', input.roomId)
		.executeTakeFirst();
	if (!room) throw refusedAt('roomId', 'Choose a room of this site.');
	const staff = await staffOn(reader, visit.studyId, visit.site.id, date);
	if (!staff.some((person) => person.id === input.staffId))
		throw refusedAt('staffId', 'This person has no role at the site on that day.');
}

function reasonOutside(visit: VisitRow, span: TimeSpan, input: BookVisitInput): string | null {
	const inside =
		visit.window !== null && inWindow(visit.window, dateInZone(span.start, visit.site.zone));
	return inside || input.outsideReason === '' ? null : input.outsideReason;
}

const refusedAt = (field: string, sentence: string) =>
	new Refusal('RULE', { why: sentence }, { [field]: sentence });

const fieldOf: Partial<Record<RefusalCode, string>> = {
	ROOM_TAKEN: 'roomId',
	STAFF_TAKEN: 'staffId',
	SUBJECT_TAKEN: 'time'
};

/** What the database refused because the time is taken, said beside the field it is about. */
async function besideTheField<T>(work: Promise<T>): Promise<T> {
	try {
		return await work;
	} catch (thrown) {
		const field = thrown instanceof Refusal ? fieldOf[thrown.code] : undefined;
		if (thrown instanceof Refusal && field)
			throw new Refusal(thrown.code, thrown.facts, { [field]: thrown.message });
		throw thrown;
	}
}
