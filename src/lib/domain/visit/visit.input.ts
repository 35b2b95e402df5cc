import { z } from 'zod';
import { holdsForbidden } from '../measurement/assess';
import { isPlainDate } from '$lib/time/dates';
import { minutesOfTime } from '$lib/time/zones';

/** What people and programs may say about bookings, visits and contacts; forms and the API share it. */

const plain = (most: number) =>
	z
		.string()
		.trim()
		.max(most, `Use at most ${most} characters.`)
		.refine(
			(text) => !holdsForbidden(text),
			'The text holds a character that cannot be kept. Type it again.'
		);

/** Text that may be left out. */
export const optionalText = (most: number) => plain(most).default('');
export const neededText = (most: number, why: string) => plain(most).min(1, why);

const date = z
	.string()
	.refine(
		(text) => isPlainDate(text) && text >= '1900-01-01' && text <= '2199-12-31',
		'Give a day that exists, as year-month-day: 2026-06-09.'
	);
const time = z.string().refine((text) => {
	const minutes = minutesOfTime(text);
	return minutes !== null && minutes < 1440;
}, 'Give a time on a 24-hour clock: 09:30.');
export const version = z.number().int().min(1).max(2_000_000_000);

const place = {
	date,
	time,
	roomId: z.uuid('Choose a room.'),
	staffId: z.uuid('Choose who takes the visit.'),
	/** Why a day outside the window. */
	outsideReason: optionalText(500)
};

export const bookVisitInput = z.strictObject(place);
export type BookVisitInput = z.output<typeof bookVisitInput>;

export const moveAppointmentInput = z.strictObject(place);
export type MoveAppointmentInput = z.output<typeof moveAppointmentInput>;

export const cancelAppointmentInput = z.strictObject({
	reason: neededText(500, 'Say why it is cancelled.')
});
export type CancelAppointmentInput = z.output<typeof cancelAppointmentInput>;

export const declareMissedInput = z.strictObject({
	reason: neededText(500, 'Say why the visit did not take place.')
});
export type DeclareMissedInput = z.output<typeof declareMissedInput>;

export const contactWays = ['telephone', 'e-mail', 'letter', 'text message', 'in person'] as const;
export const contactOutcomes = [
	'reached',
	'no answer',
	'message left',
	'wrong details',
	'declined'
] as const;

export const logContactInput = z.strictObject({
	way: z.enum(contactWays, 'Choose how.'),
	outcome: z.enum(contactOutcomes, 'Choose what came of it.'),
	/** Left out: now. */
	at: z.iso.datetime({ offset: true, error: 'Give a date and a time.' }).optional(),
	nextStep: optionalText(500),
	tryAgainOn: z.union([z.literal(''), date]).default('')
});
export type LogContactInput = z.output<typeof logContactInput>;

/** As a form says it: day and time by the site’s own clocks. */
export const logContactForm = logContactInput
	.omit({ at: true })
	.extend({ onDate: date, onTime: time });

export const freeTimesQuery = z.object({
	date,
	roomId: z.uuid('Choose a room.').optional(),
	staffId: z.uuid('Choose a person.').optional()
});

const versioned = { version };
export const bookVisitForm = bookVisitInput.extend(versioned);
export const moveAppointmentForm = moveAppointmentInput.extend(versioned);
export const cancelAppointmentForm = cancelAppointmentInput.extend(versioned);
export const declareMissedForm = declareMissedInput.extend(versioned);
export const visitStepForm = z.strictObject(versioned);
