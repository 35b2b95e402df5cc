import type { RequestEvent, RequestHandler } from '@sveltejs/kit';
import { z } from 'zod';
import { Refusal } from '$lib/refusal';
import type { Actor } from '../actor';
import { fault, problem } from './problem';
import { readJson } from './body';
import { fieldErrors } from './fields';

/** What an endpoint is told: everything parsed, nothing raw. */
export interface Call<Body, Query> {
	actor: Actor;
	params: Record<string, string>;
	body: Body;
	query: Query;
	/** The version named by If-Match; given whenever the endpoint needs one. */
	version: number;
	event: RequestEvent;
}

export interface EndpointSpec<B extends z.ZodType, Q extends z.ZodType, R extends z.ZodType> {
	summary: string;
	body?: B;
	query?: Q;
	response: R;
	/** 201 for what makes something, 200 otherwise. */
	status?: number;
	/** Whether the request must name the version it changes (428 without, 412 when stale). */
	needsVersion?: boolean;
	/** The largest body in bytes; 256 KiB unless said. */
	limit?: number;
	handle: (call: Call<z.output<B>, z.output<Q>>) => Promise<z.input<R>>;
}

export type Endpoint = RequestHandler & { spec: EndpointSpec<z.ZodType, z.ZodType, z.ZodType> };

function versionOf(event: RequestEvent): number {
	const given = event.request.headers.get('if-match');
	if (given === null) throw new Refusal('VERSION_NEEDED');
	const match = /^"(\d{1,9})"$/.exec(given.trim());
	if (!match) throw new Refusal('STALE');
	return Number(match[1]);
}

/** For what is made and changed at one address: the version named, or null where none is. */
export const versionIfGiven = (event: RequestEvent): number | null =>
	event.request.headers.get('if-match') === null ? null : versionOf(event);

function parsed<S extends z.ZodType>(schema: S, value: unknown): z.output<S> {
	const result = schema.safeParse(value);
	if (!result.success) throw new Refusal('INVALID', {}, fieldErrors(result.error));
	return result.data;
}

/**
 * One way in for JSON: parses the parameters, the version and the body, calls the command, answers with problem details
 * when it is refused. The same declaration makes the OpenAPI document.
 */
export function endpoint<
	B extends z.ZodType = z.ZodUndefined,
	Q extends z.ZodType = z.ZodUndefined,
	R extends z.ZodType = z.ZodType
>(spec: EndpointSpec<B, Q, R>): Endpoint {
	const handler: RequestHandler = async (event) => {
		try {
			const actor = event.locals.actor;
			if (!actor) throw new Refusal('NOT_SIGNED_IN');
			const version = spec.needsVersion ? versionOf(event) : 0;
			const query = spec.query
				? parsed(spec.query, Object.fromEntries(event.url.searchParams))
				: undefined;
			const body = spec.body
				? parsed(spec.body, await readJson(event.request, spec.limit))
				: undefined;
			const answer = await spec.handle({
				actor,
				params: event.params as Record<string, string>,
				body: body as z.output<B>,
				query: query as z.output<Q>,
				version,
				event
			});
			const headers: Record<string, string> = { 'cache-control': 'no-store' };
			const row = answer as { version?: unknown } | null;
			if (row && typeof row === 'object' && typeof row.version === 'number')
				headers.etag = `"${row.version}"`;
			return Response.json(answer ?? null, { status: spec.status ?? 200, headers });
		} catch (error) {
			if (error instanceof Refusal) return problem(error, event.locals.requestId);
			return fault(error, event.locals.requestId);
		}
	};
	return Object.assign(handler, { spec: spec as unknown as Endpoint['spec'] });
}
