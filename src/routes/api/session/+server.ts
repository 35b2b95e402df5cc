import { z } from 'zod';
import { endpoint } from '$lib/server/api/endpoint';
import { endSession } from '$lib/server/auth/session';

const grant = z.object({
	role: z.string(),
	studyId: z.string().nullable(),
	siteId: z.string().nullable()
});

export const GET = endpoint({
	summary: 'Who is signed in, with the roles in force now',
	response: z.object({ personId: z.string(), name: z.string(), grants: z.array(grant) }),
	handle: async ({ actor }) => ({
		personId: actor.personId,
		name: actor.name,
		grants: [...actor.grants]
	})
});

export const DELETE = endpoint({
	summary: 'End this session, and this one alone',
	response: z.object({ ended: z.boolean() }),
	handle: async ({ actor }) => {
		await endSession(actor, actor.sessionId ?? '');
		return { ended: true };
	}
});
