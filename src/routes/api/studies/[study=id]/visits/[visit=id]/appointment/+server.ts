import { z } from 'zod';
import { bookVisit, moveAppointment } from '$lib/domain/visit/booking.commands.server';
import { bookVisitInput, moveAppointmentInput } from '$lib/domain/visit/visit.input';
import { endpoint } from '$lib/server/api/endpoint';

const booked = z
	.object({
		appointmentId: z.string(),
		version: z.number(),
		visitVersion: z.number(),
		startsAt: z.iso.datetime(),
		endsAt: z.iso.datetime()
	})
	.meta({ id: 'BookedAppointment' });

const told = <T extends { startsAt: Date; endsAt: Date }>(made: T) => ({
	...made,
	startsAt: made.startsAt.toISOString(),
	endsAt: made.endsAt.toISOString()
});

export const POST = endpoint({
	summary: 'Book the visit; If-Match names the visit’s version',
	body: bookVisitInput,
	response: booked,
	status: 201,
	needsVersion: true,
	handle: async ({ actor, params, body, version }) =>
		told(await bookVisit(actor, params.study as string, params.visit as string, version, body))
});

export const PUT = endpoint({
	summary: 'Move the appointment; If-Match names the appointment’s version',
	body: moveAppointmentInput,
	response: booked,
	needsVersion: true,
	handle: async ({ actor, params, body, version }) =>
		told(
			await moveAppointment(actor, params.study as string, params.visit as string, version, body)
		)
});
