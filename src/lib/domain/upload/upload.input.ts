import { z } from 'zod';

/** Why a scan is replaced; the first one needs no reason. */
export const scanReason = z
	.string()
	.trim()
	.max(500, 'At most 500 characters.')
	.refine(
		(text) => ![...text].some((sign) => sign < ' ' || sign === '\u007f'),
		'Use one line of plain text.'
	);

export const scanOutput = z
	.object({
		id: z.uuid(),
		version: z.number(),
		kind: z.enum(['pdf', 'png', 'jpeg']),
		bytes: z.number(),
		sha256: z.string()
	})
	.meta({ id: 'SignedScan' });
export type ScanOutput = z.output<typeof scanOutput>;
