import { z } from 'zod';

export const releaseInput = z.strictObject({
	people: z
		.array(z.uuid('Choose people of the list.'))
		.min(1, 'Choose at least one board member.')
		.max(50, 'Choose at most 50.')
		.meta({ description: 'Board members of this study.' })
});
export type ReleaseInput = z.output<typeof releaseInput>;

export const approveInput = z.strictObject({ releaseId: z.uuid('Choose a release of the list.') });
