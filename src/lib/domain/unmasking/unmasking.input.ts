import { z } from 'zod';
import { isPlainDate } from '$lib/time/dates';
import { minutesOfTime } from '$lib/time/zones';

/** Words of a person, on one line or several, without the characters that no text needs. */
const words = (most: number, said: string) =>
	z.string().trim().min(1, said).max(most, `Use at most ${most} characters.`);

const reason = words(500, 'Say why it was needed.');

/** What the investigator gives to be shown one arm. The password is always asked. */
export const unmaskInput = z.strictObject({
	reason,
	email: z.string().max(254).default(''),
	password: z.string().min(1, 'Enter your password.').max(256)
});
export const unmaskForm = z.object({
	...unmaskInput.shape,
	reason: reason.default(''),
	password: unmaskInput.shape.password.default('')
});
export type UnmaskInput = z.input<typeof unmaskInput>;

const outside = {
	kind: z.enum(['sealed code', 'accidental'], 'Say how the arm became known.'),
	/** From inside the opened sheet. */
	code: z.string().trim().max(40).default(''),
	knownTo: words(200, 'Say who knows the arm now.'),
	happenedOn: z.string().refine((text): boolean => isPlainDate(text), 'Enter a date that exists.'),
	happenedTime: z
		.string()
		.refine(
			(text) => minutesOfTime(text) !== null && text !== '24:00',
			'Enter a time on a 24-hour clock: 09:30.'
		),
	reason: words(500, 'Say what happened, without the arm.'),
	impact: z.string().trim().max(500, 'Use at most 500 characters.').default('')
};

/** An arm that became known outside Heddle. Date and time are those of the site's own clocks. */
export const outsideInput = z.strictObject(outside);
export const outsideForm = z.object({
	...outside,
	kind: z
		.string()
		.default('')
		.refine(
			(text): boolean => text === 'sealed code' || text === 'accidental',
			'Say how the arm became known.'
		)
});
export type OutsideInput = z.output<typeof outsideInput>;
