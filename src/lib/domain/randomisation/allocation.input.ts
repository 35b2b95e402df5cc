import { z } from 'zod';

/** The chance of the favoured arm: high enough to balance, low enough that nobody can be sure of it. */
export const bestChance = z
	.number('Give a number from 0.55 to 0.95.')
	.min(0.55, 'Give a number from 0.55 to 0.95.')
	.max(0.95, 'Give a number from 0.55 to 0.95.')
	.refine(
		(chance) => Math.abs(chance * 100 - Math.round(chance * 100)) < 1e-9,
		'At most two decimals.'
	);

export const askForListInput = z.strictObject({ bestChance: bestChance.optional() });
export type AskForListInput = z.infer<typeof askForListInput>;

const reason = z.string().trim().min(1, 'Say why.').max(500, 'Use at most 500 characters.');

export const correctStratumInput = z.strictObject({
	stratum: z.record(z.string().max(40), z.string().max(40)),
	reason
});
export type CorrectStratumInput = z.infer<typeof correctStratumInput>;
