import type { FieldErrors } from '$lib/refusal';

/** A refusal as the API tells it. */
export class ApiRefusal extends Error {
	constructor(
		readonly status: number,
		readonly code: string,
		message: string,
		readonly fields: FieldErrors
	) {
		super(message);
	}
}

interface Options {
	method?: 'GET' | 'POST' | 'PUT' | 'PATCH' | 'DELETE';
	body?: unknown;
	/** The version this change was based on. */
	version?: number;
	/** Asked by the page itself, not by a person: does not count as being there. */
	background?: boolean;
	signal?: AbortSignal;
}

/** Calls the API; an answer that is a refusal is thrown as one. A locked screen asks for the password first. */
export async function api<T>(path: string, options: Options = {}): Promise<T> {
	const headers: Record<string, string> = { accept: 'application/json' };
	if (options.body !== undefined) headers['content-type'] = 'application/json';
	if (options.version !== undefined) headers['if-match'] = `"${options.version}"`;
	if (options.background) headers['x-heddle-background'] = 'yes';
	const response = await fetch(path, {
		method: options.method ?? 'GET',
		headers,
		body: options.body === undefined ? undefined : JSON.stringify(options.body),
		signal: options.signal
	});
	if (response.ok) return (await response.json()) as T;
	const told = (await response.json().catch(() => null)) as {
		code?: string;
		title?: string;
		errors?: FieldErrors;
	} | null;
	if (response.status === 423) window.dispatchEvent(new Event('heddle:locked'));
	throw new ApiRefusal(
		response.status,
		told?.code ?? 'FAULT',
		told?.title ?? 'The server did not answer as expected.',
		told?.errors ?? {}
	);
}
