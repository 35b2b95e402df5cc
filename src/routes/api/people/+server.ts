import { z } from 'zod';
import { peopleOutput } from '$lib/domain/person/person.input';
import { listPeople } from '$lib/domain/person/person.reads.server';
import { endpoint } from '$lib/server/api/endpoint';
import { pageQuery } from '$lib/server/api/page';

export const GET = endpoint({
	summary: 'Accounts by name',
	query: pageQuery.extend({
		find: z
			.string()
			.max(100, 'At most 100 characters.')
			.refine(
				(text) => !text.includes('\u0000'),
				'This text holds a character that cannot be kept.'
			)
			.optional()
	}),
	response: peopleOutput,
	handle: ({ actor, query }) => listPeople(actor, query)
});
