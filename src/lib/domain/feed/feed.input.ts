import { z } from 'zod';

/** A site’s whole day, or without a site one’s own visits wherever they are. */
export const makeFeedInput = z.strictObject({
	siteId: z.union([z.literal(''), z.uuid('Choose a site of the list.')]).default('')
});
export type MakeFeedInput = z.output<typeof makeFeedInput>;
