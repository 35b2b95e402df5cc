import { z } from 'zod';
import { searchContacts } from '$lib/domain/subject/contact-search.server';
import { contactSearchInput } from '$lib/domain/subject/subject.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Finds people of one’s own sites by name. A name never stands in an address, so this is no GET; each one found is a reading of contact details.',
	body: contactSearchInput,
	response: z.object({
		items: z.array(
			z.object({ subjectId: z.uuid(), number: z.string(), site: z.string(), name: z.string() })
		),
		more: z.boolean()
	}),
	handle: ({ actor, params, body }) => searchContacts(actor, params.study as string, body)
});
