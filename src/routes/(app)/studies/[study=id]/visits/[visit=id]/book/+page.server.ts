import { redirect } from '@sveltejs/kit';
import {
	bookVisit,
	cancelAppointment,
	moveAppointment
} from '$lib/domain/visit/booking.commands.server';
import { getBookingPage } from '$lib/domain/visit/booking.reads.server';
import {
	bookVisitForm,
	cancelAppointmentForm,
	freeTimesQuery,
	moveAppointmentForm
} from '$lib/domain/visit/visit.input';
import { timeLeft } from '$lib/domain/schedule/window';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import type { Actions, PageServerLoad } from './$types';

/** The day, room and person in the address choose which free times are shown; what is wrong there is left out. */
function asked(params: URLSearchParams) {
	const pick = (name: 'date' | 'roomId' | 'staffId') => {
		const read = freeTimesQuery.shape[name].safeParse(params.get(name) || undefined);
		return read.success ? read.data : undefined;
	};
	const date = pick('date');
	return {
		date: date === undefined ? undefined : plainDateOf(date),
		roomId: pick('roomId'),
		staffId: pick('staffId')
	};
}

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	return serve(async () => {
		const page = await getBookingPage(actor, params.study, params.visit, asked(url.searchParams));
		const { visit, booking, chosen, free } = page;
		const form = await formFor(
			booking ? moveAppointmentForm : bookVisitForm,
			{
				...chosen,
				time: booking && booking.date === chosen.date ? booking.time : '',
				staffId: free.staff.some((person) => person.id === chosen.staffId) ? chosen.staffId : '',
				outsideReason: booking?.outsideReason ?? '',
				version: booking ? booking.version : visit.version
			},
			'book'
		);
		return {
			visit: {
				id: visit.id,
				subjectId: visit.subjectId,
				number: visit.number,
				name: visit.name,
				status: visit.status,
				window: visit.window,
				today: visit.today,
				site: visit.site.name,
				zone: visit.site.zone,
				minutes: visit.lengthMinutes
			},
			dates: visit.window
				? {
						earliest: shortDateText(visit.window.earliest),
						target: shortDateText(visit.window.target),
						latest: shortDateText(visit.window.latest)
					}
				: null,
			left: visit.window ? timeLeft(visit.window, visit.today) : null,
			subjectLeft: page.left,
			booking,
			rooms: page.rooms,
			free,
			lastMail: page.lastMail,
			form,
			cancelForm: await formFor(
				cancelAppointmentForm,
				{ reason: '', version: booking?.version ?? 1 },
				'cancel'
			)
		};
	});
};

export const actions: Actions = {
	book: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const answer = await submit(
			request,
			bookVisitForm,
			async ({ version, ...input }) => {
				await bookVisit(actor, params.study, params.visit, version, input);
			},
			'book'
		);
		if ('status' in answer) return answer;
		redirect(303, `/studies/${params.study}/visits/${params.visit}/book?done=booked`);
	},
	move: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const answer = await submit(
			request,
			moveAppointmentForm,
			async ({ version, ...input }) => {
				await moveAppointment(actor, params.study, params.visit, version, input);
			},
			'book'
		);
		if ('status' in answer) return answer;
		redirect(303, `/studies/${params.study}/visits/${params.visit}/book?done=moved`);
	},
	cancel: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const answer = await submit(
			request,
			cancelAppointmentForm,
			async ({ version, ...input }) => {
				await cancelAppointment(actor, params.study, params.visit, version, input);
			},
			'cancel'
		);
		if ('status' in answer) return answer;
		redirect(303, `/studies/${params.study}/visits/${params.visit}/book?done=cancelled`);
	}
};
