import { z } from 'zod';
import { isPlainDate } from '$lib/time/dates';

const said = (least: number, most: number) => `Give a whole number from ${least} to ${most}.`;
const whole = (least: number, most: number) =>
	z
		.number(said(least, most))
		.int(said(least, most))
		.min(least, said(least, most))
		.max(most, said(least, most));
/** The same as a form says it. */
const typed = (least: number, most: number) => z.coerce.number().pipe(whole(least, most));

export const kitPlanInput = z.strictObject({ useDays: whole(0, 1100) });
export const kitPlanForm = z.object({ ...kitPlanInput.shape, useDays: typed(0, 1100).default(30) });
export type KitPlanInput = z.output<typeof kitPlanInput>;

export const kitLevelInput = z.strictObject({
	siteId: z.uuid('Choose one of the list.'),
	fullStock: whole(2, 5000),
	resupplyAt: whole(1, 4999),
	version: whole(0, 1_000_000_000)
});
export const kitLevelForm = z.object({
	siteId: kitLevelInput.shape.siteId,
	fullStock: typed(2, 5000),
	resupplyAt: typed(1, 4999),
	version: typed(0, 1_000_000_000)
});
export type KitLevelInput = z.output<typeof kitLevelInput>;

export const sendKitsInput = z.strictObject({
	siteId: z.uuid('Choose one of the list.'),
	expiresOn: z.string().refine((text): boolean => isPlainDate(text), 'Enter a date that exists.')
});
export const sendKitsForm = z.object({
	siteId: z
		.string()
		.default('')
		.refine((text): boolean => z.uuid().safeParse(text).success, 'Choose one of the list.'),
	expiresOn: sendKitsInput.shape.expiresOn.default('')
});
export type SendKitsInput = z.output<typeof sendKitsInput>;

export const receiveForm = z.object({ deliveryId: z.uuid('Choose one of the list.') });

/** What became of a kit that nobody was given. */
export const kitFateInput = z.strictObject({
	kitNumber: z.string().trim().min(1, 'Enter the kit’s number.').max(20),
	status: z.enum(['damaged', 'lost'], 'Say what became of it.'),
	note: z.string().trim().min(1, 'Say what happened.').max(300, 'Use at most 300 characters.')
});
export const kitFateForm = z.object({
	...kitFateInput.shape,
	status: z
		.string()
		.default('')
		.refine((text): boolean => text === 'damaged' || text === 'lost', 'Say what became of it.')
});
export type KitFateInput = z.output<typeof kitFateInput>;
