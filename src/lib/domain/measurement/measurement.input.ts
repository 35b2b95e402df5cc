import { z } from 'zod';
import { optionalText } from '../visit/visit.input';

/** A value as typed: text keeps the decimals a person wrote. */
const typed = z.union([
	z.string().max(4000, 'Use at most 4000 characters.'),
	z.number('Give a number or a text.')
]);
const unit = z.string().max(40).optional();

export const entryInput = z.discriminatedUnion(
	'kind',
	[
		z.strictObject({ kind: z.literal('value'), value: typed, unit }),
		z.strictObject({ kind: z.literal('readings'), values: z.array(typed).min(1).max(10), unit }),
		z.strictObject({ kind: z.literal('not done'), reason: z.string().max(200) })
	],
	'Say whether this is a value, readings, or not done.'
);

export const recordMeasurementInput = z.strictObject({
	entry: entryInput,
	/** What the person said when an unusual value was questioned. */
	softAnswer: optionalText(500),
	comment: optionalText(1000),
	/** When it was observed; left out: now. The time of entry is the server's own. */
	takenAt: z.iso.datetime({ offset: true, error: 'Give a date and a time.' }).optional(),
	/** Why a saved value changes. */
	reason: optionalText(500)
});
export type RecordMeasurementInput = z.output<typeof recordMeasurementInput>;
