import { z } from 'zod';
import { cancelAppointment } from '$lib/domain/visit/booking.commands.server';
import { cancelAppointmentInput } from '$lib/domain/visit/visit.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Cancel the appointment; If-Match names the appointment’s version',
	body: cancelAppointmentInput,
	response: z.object({ appointmentId: z.string(), version: z.number(), visitVersion: z.number() }),
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		cancelAppointment(actor, params.study as string, params.visit as string, version, body)
});
