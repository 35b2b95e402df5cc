import { boardOutput } from '$lib/domain/board/board.output';
import { findBoardRoom } from '$lib/domain/board/board.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary:
		'The board room: to a member, the packs released to them; to the team, which went to whom.',
	response: boardOutput,
	handle: ({ actor, params }) => findBoardRoom(actor, params.study as string)
});
