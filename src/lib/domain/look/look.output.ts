import { z } from 'zod';
import { cutOutput } from '../cut/cut.output';
import { lookSpec } from './look.input';

const status = z.enum(['waiting', 'running', 'done', 'failed', 'cancelled']);

/** A look by arm, for everyone who may not read it. */
const closedLook = z.object({
	id: z.uuid(),
	number: z.number(),
	kind: z.literal('by arm'),
	open: z.literal(false)
});

const openLook = z.object({
	id: z.uuid(),
	number: z.number(),
	kind: z.enum(['pooled', 'by arm']),
	open: z.literal(true),
	planned: z.boolean(),
	status,
	error: z.string().nullable(),
	jobRunId: z.uuid().nullable(),
	requestedBy: z.string(),
	requestedAt: z.iso.datetime(),
	question: z.string().nullable()
});

export const lookHeadOutput = z.union([
	closedLook,
	openLook.extend({ cut: z.object({ number: z.number(), label: z.string() }) })
]);

export const lookOutput = z.union([
	closedLook,
	openLook.extend({
		cut: cutOutput,
		spec: lookSpec,
		result: z.unknown().meta({
			description: 'Estimates, variances, lines, residuals, notes; null until it is done.'
		}),
		inputHash: z.string().nullable(),
		engineVersion: z.string().nullable(),
		finishedAt: z.iso.datetime().nullable()
	})
]);
