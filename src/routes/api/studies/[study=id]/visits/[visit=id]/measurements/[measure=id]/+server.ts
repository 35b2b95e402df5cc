import { z } from 'zod';
import { recordMeasurement } from '$lib/domain/measurement/measurement.commands.server';
import { recordMeasurementInput } from '$lib/domain/measurement/measurement.input';
import { endpoint, versionIfGiven } from '$lib/server/api/endpoint';

export const PUT = endpoint({
	summary: 'Keep a measurement; If-Match names its version when it is kept already',
	body: recordMeasurementInput,
	response: z.object({ id: z.string(), version: z.number() }),
	handle: ({ actor, params, body, event }) =>
		recordMeasurement(
			actor,
			params.study as string,
			params.visit as string,
			params.measure as string,
			versionIfGiven(event),
			body
		)
});
