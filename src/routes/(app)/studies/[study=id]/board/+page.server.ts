import { recommendationInput } from '$lib/domain/board/board.input';
import { findBoardRoom, recommend } from '$lib/domain/board/board.server';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import { clock } from '$lib/time/clock';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const room = await serve(() => findBoardRoom(actorOf({ locals }), params.study));
	return {
		...room,
		today: clock.now().toISOString().slice(0, 10),
		form: await formFor(recommendationInput, {
			reportId: room.packs.find(({ ready }) => ready)?.reportId ?? '',
			// No advice is given by leaving a field as it was.
			advice: '',
			reason: '',
			attendees: '',
			meetingOn: ''
		} as never)
	};
};

export const actions: Actions = {
	default: (event) =>
		submit(event.request, recommendationInput, async (input) => {
			await recommend(actorOf(event), event.params.study, input);
			return 'The recommendation is recorded. The study team can read it.';
		})
};
