import type { z } from 'zod';
import type { FieldErrors } from '$lib/refusal';

/** One sentence for each field that a schema turned down; the path is dotted, an empty path is the whole body. */
export function fieldErrors(error: z.ZodError): FieldErrors {
	const fields: FieldErrors = {};
	for (const issue of error.issues) {
		const path = issue.path.map(String).join('.') || 'body';
		fields[path] ??= issue.message;
	}
	return fields;
}
