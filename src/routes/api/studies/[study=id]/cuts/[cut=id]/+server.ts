import { cutOutput } from '$lib/domain/cut/cut.output';
import { getCut } from '$lib/domain/cut/cut.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'One data cut, without its content.',
	response: cutOutput,
	handle: ({ actor, params }) => getCut(actor, params.study as string, params.cut as string)
});
