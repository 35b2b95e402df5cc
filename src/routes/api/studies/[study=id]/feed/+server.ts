import { z } from 'zod';
import { makeFeed, revokeFeed } from '$lib/domain/feed/feed.commands.server';
import { makeFeedInput } from '$lib/domain/feed/feed.input';
import { findFeed } from '$lib/domain/feed/feed.reads.server';
import { endpoint } from '$lib/server/api/endpoint';
import { feedAddress } from '$lib/server/feed-address';

export const GET = endpoint({
	summary: 'Your own calendar address in this study, if there is one',
	response: z.object({
		feed: z.object({ since: z.string(), site: z.string().nullable() }).nullable()
	}),
	handle: async ({ actor, params }) => ({ feed: await findFeed(actor, params.study as string) })
});

export const POST = endpoint({
	summary: 'Make or renew your secret calendar address; it is told once',
	body: makeFeedInput,
	response: z.object({ address: z.url() }),
	status: 201,
	handle: async ({ actor, params, body }) => ({
		address: feedAddress((await makeFeed(actor, params.study as string, body)).token)
	})
});

export const DELETE = endpoint({
	summary: 'Revoke your secret calendar address',
	response: z.object({ revoked: z.number() }),
	handle: ({ actor, params }) => revokeFeed(actor, params.study as string)
});
