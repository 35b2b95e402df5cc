import { z } from 'zod';

export const cutOutput = z.object({
	id: z.uuid(),
	number: z.number(),
	label: z.string(),
	cutOffAt: z.iso.datetime(),
	extractedAt: z.iso.datetime(),
	madeBy: z.string(),
	subjects: z.number(),
	measurements: z.number(),
	fingerprint: z.string()
});
