import { error, fail } from '@sveltejs/kit';
import { setError, superValidate, type SuperValidated } from 'sveltekit-superforms';
import { zod4 } from 'sveltekit-superforms/adapters';
import type { z } from 'zod';
import { Refusal } from '$lib/refusal';

type Schema = z.ZodType<Record<string, unknown>, Record<string, unknown>>;

/** What a form shows at its top: said, refused, and by which code (so that a page can offer the next step). */
export interface FormMessage {
	kind: 'done' | 'refused';
	text: string;
	code?: string;
}

/** An empty (or filled) form for a load. */
export const formFor = <S extends Schema>(schema: S, data?: Partial<z.input<S>>, id?: string) =>
	superValidate<z.output<S>, FormMessage, z.input<S>>(
		data as z.input<S> | undefined,
		zod4(schema as never) as never,
		{ ...(id ? { id } : {}), errors: false } as never
	);

/** The form that was sent; what is no form, or is cut off, is refused. */
export async function readForm(request: Request): Promise<FormData> {
	const body = await request.formData().catch(() => null);
	if (!body)
		error(400, {
			message: 'The form could not be read. Load the page again and send it once more.'
		});
	return body;
}

/**
 * One action: parses the form by its schema, runs the command, and gives refusals back beside the field or at the top.
 * Typed values stay. Redirects thrown inside pass through.
 */
export async function submit<S extends Schema>(
	request: Request,
	schema: S,
	work: (data: z.output<S>) => Promise<string | void>,
	id?: string
) {
	const body = await request.formData().catch(() => null);
	if (!body)
		error(400, {
			message: 'The form could not be read. Load the page again and send it once more.'
		});
	for (const [name, value] of body)
		if (typeof value === 'string' && value.includes('\u0000'))
			body.set(name, value.replaceAll('\u0000', '\uFFFD'));
	const form = (await superValidate(
		body,
		zod4(schema as never) as never,
		(id ? { id } : {}) as never
	)) as unknown as SuperValidated<z.output<S>, FormMessage, z.input<S>>;
	if (!form.valid) return fail(400, { form });
	try {
		const said = await work(form.data);
		form.message = { kind: 'done', text: said ?? 'Saved.' };
		return { form };
	} catch (thrown) {
		if (!(thrown instanceof Refusal)) throw thrown;
		for (const [path, sentence] of Object.entries(thrown.fields))
			setError(form as never, path as never, sentence);
		form.message = { kind: 'refused', text: thrown.message, code: thrown.code };
		return fail(thrown.status, { form });
	}
}

/** A form that goes back to the page carries no password with it. */
export function withoutSecrets<R>(answer: R): R {
	const held = answer as { form?: { data: object }; data?: { form?: { data: object } } };
	const data = (held.form ?? held.data?.form)?.data as Record<string, unknown> | undefined;
	for (const name of ['password', 'again', 'current']) if (data && name in data) data[name] = '';
	return answer;
}
