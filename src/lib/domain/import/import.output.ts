import { z } from 'zod';

export const importOutput = z.object({
	id: z.uuid(),
	version: z.number(),
	fileName: z.string(),
	bytes: z.number(),
	sha256: z.string(),
	status: z.enum(['uploaded', 'checking', 'checked', 'importing', 'imported', 'failed']),
	columns: z.array(z.string()),
	mapping: z.unknown(),
	jobRunId: z.uuid().nullable(),
	uploadedBy: z.string(),
	createdAt: z.iso.datetime(),
	problemCount: z.number().nullable(),
	summary: z
		.object({
			problemCount: z.number(),
			problems: z.array(
				z.object({ row: z.number().nullable(), column: z.string().nullable(), message: z.string() })
			),
			subjects: z.number(),
			newSubjects: z.number(),
			visits: z.number(),
			values: z.number(),
			missing: z.number(),
			protocol: z
				.object({
					visits: z.array(z.string()),
					measures: z.array(z.string()),
					characteristics: z.array(z.string())
				})
				.nullable()
		})
		.nullable()
});

export const importHeadOutput = importOutput.pick({
	id: true,
	fileName: true,
	bytes: true,
	sha256: true,
	status: true,
	problemCount: true,
	uploadedBy: true,
	createdAt: true
});

export const startedOutput = z.object({ jobRunId: z.uuid(), version: z.number() });
