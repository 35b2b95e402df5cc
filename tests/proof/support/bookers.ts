import { addDays, isoWeekday, type PlainDate } from '../../../src/lib/time/dates';
import type { Visitor } from '../../support/people';
import type { Scene, SceneSubject } from '../../support/visit-scene';
import { insist } from './savers';

export interface Slot {
	date: PlainDate;
	time: string;
}

/** Beginnings of visits of 45 minutes inside the opening hours, from the day after `today`. */
export function slotsFrom(today: PlainDate, count: number): Slot[] {
	const times = ['08:00', '08:45', '09:30', '10:15', '11:00', '13:15', '14:00', '14:45', '15:30'];
	const slots: Slot[] = [];
	for (let day = 1; slots.length < count; day++) {
		const date = addDays(today, day);
		if (isoWeekday(date) <= 5) slots.push(...times.map((time) => ({ date, time })));
	}
	return slots.slice(0, count);
}

export interface BookingTally {
	/** Appointments the server said it kept, with their visits. */
	booked: { appointmentId: string; visitId: string }[];
	unanswered: number;
	bookedUnheard: number;
	wrong: string[];
}

export const emptyBookings = (): BookingTally => ({
	booked: [],
	unanswered: 0,
	bookedUnheard: 0,
	wrong: []
});

/** Books each subject at its own time, until told to stop. */
export async function bookUntil(
	visitor: Visitor,
	scene: Scene,
	place: { roomId: string; staffId: string },
	subjects: readonly SceneSubject[],
	slots: readonly Slot[],
	stopped: () => boolean,
	tally: BookingTally
): Promise<void> {
	for (const [at, subject] of subjects.entries()) {
		if (stopped()) return;
		const visitId = subject.visits['month-6'] as string;
		const { answer, tries } = await insist(tally, () =>
			visitor.send(
				'POST',
				`/api/studies/${scene.studyId}/visits/${visitId}/appointment`,
				{ ...slots[at], ...place },
				{ 'if-match': '"1"' }
			)
		);
		if (answer.status === 201)
			tally.booked.push({ appointmentId: answer.body.appointmentId as string, visitId });
		else if ((answer.status === 409 || answer.status === 412) && tries > 1) tally.bookedUnheard++;
		else tally.wrong.push(`${visitId}: ${answer.status} ${JSON.stringify(answer.body)}`);
	}
	if (!stopped()) tally.wrong.push('There were not enough subjects to book to the end');
}
