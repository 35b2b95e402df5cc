import { createDocument, type ZodOpenApiPathsObject } from 'zod-openapi';
import { z } from 'zod';
import type { Endpoint } from './endpoint';

const methods = ['GET', 'POST', 'PUT', 'PATCH', 'DELETE'] as const;

const problemSchema = z
	.object({
		type: z.string(),
		title: z.string(),
		status: z.number(),
		detail: z.string(),
		instance: z.string(),
		code: z.string(),
		errors: z.record(z.string(), z.string()).optional()
	})
	.meta({ id: 'Problem' });

/** The OpenAPI document, made from the same declarations that answer the requests. */
export function openApi(modules: Record<string, Record<string, unknown>>) {
	const paths: ZodOpenApiPathsObject = {};
	for (const [file, module] of Object.entries(modules).sort(([a], [b]) => a.localeCompare(b))) {
		const route = file.replace(/^.*\/routes/, '').replace(/\/\+server\.ts$/, '');
		const path = route.replace(/\[(\w+)(=\w+)?\]/g, '{$1}');
		const names = [...route.matchAll(/\[(\w+)(=\w+)?\]/g)].map((match) => match[1] as string);
		for (const method of methods) {
			const spec = (module[method] as Endpoint | undefined)?.spec;
			if (!spec) continue;
			const parameters: Record<string, z.ZodType> = Object.fromEntries(
				names.map((name) => [name, z.uuid()])
			);
			paths[path] = {
				...paths[path],
				[method.toLowerCase()]: {
					summary: spec.summary,
					requestParams: {
						...(names.length > 0 ? { path: z.object(parameters) } : {}),
						...(spec.query instanceof z.ZodObject ? { query: spec.query } : {}),
						...(spec.needsVersion ? { header: z.object({ 'If-Match': z.string() }) } : {})
					},
					...(spec.body
						? { requestBody: { content: { 'application/json': { schema: spec.body } } } }
						: {}),
					responses: {
						[String(spec.status ?? 200)]: {
							description: 'Done.',
							content: { 'application/json': { schema: spec.response } }
						},
						default: {
							description: 'Refused; nothing was written.',
							content: { 'application/problem+json': { schema: problemSchema } }
						}
					}
				}
			};
		}
	}
	return createDocument({
		openapi: '3.1.0',
		info: {
			title: 'Heddle',
			version: '1',
			description: 'Sign in first; each call acts by your own roles.'
		},
		paths
	});
}
