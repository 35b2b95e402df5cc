import { lookOutput } from '$lib/domain/look/look.output';
import { getLook } from '$lib/domain/look/look.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'One look. Reading one by arm is written down.',
	response: lookOutput,
	handle: ({ actor, params }) => getLook(actor, params.study as string, params.look as string)
});
