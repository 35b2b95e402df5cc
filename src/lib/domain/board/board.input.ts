import { z } from 'zod';
import { isPlainDate } from '../../time/dates';

export const advices = ['continue unchanged', 'continue with changes', 'pause', 'stop'] as const;

const text = (most: number, missing: string) =>
	z.string().trim().min(1, missing).max(most, `Use at most ${most} characters.`);

export const recommendationInput = z.strictObject({
	reportId: z.uuid('Choose a pack of the list.'),
	advice: z.enum(advices, { error: 'Choose what the board advises.' }),
	reason: text(4000, 'Say why.'),
	meetingOn: z
		.string()
		.refine(isPlainDate, 'Give a day that exists, as year-month-day.')
		.meta({ format: 'date', description: 'The day the board met.' }),
	attendees: text(1000, 'Say who was there.')
});
export type RecommendationInput = z.output<typeof recommendationInput>;
