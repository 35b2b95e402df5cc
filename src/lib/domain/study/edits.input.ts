import { z } from 'zod';
import { keySchema } from './definition';
import { editedLists, factFields } from './edit-lists';

const list = z.enum(editedLists, 'There is no such list in a study definition.');
const itemKey = z.string().min(1).max(90);
const place = z.number().int().min(0).max(999);
const fields = z
	.record(z.string().max(60), z.unknown())
	.refine((set) => Object.keys(set).length > 0, 'Say what is to be set.')
	.meta({ description: 'Field to new value; null takes an optional field away.' });

/**
 * One edit of a draft. Items are named by their key: a site by its code, a consent form by its version, a comparison by
 * its two measures as “lower<higher”.
 */
export const editInput = z.discriminatedUnion('edit', [
	z.strictObject({
		edit: z.literal('facts'),
		set: z.partialRecord(z.enum(factFields), z.unknown())
	}),
	z.strictObject({
		edit: z.literal('add'),
		list,
		item: z.record(z.string().max(60), z.unknown()),
		at: place.optional()
	}),
	z.strictObject({ edit: z.literal('change'), list, key: itemKey, set: fields }),
	z.strictObject({ edit: z.literal('rename'), list, key: itemKey, to: itemKey }),
	z.strictObject({ edit: z.literal('remove'), list, key: itemKey }),
	z.strictObject({ edit: z.literal('move'), list, key: itemKey, to: place }),
	z.strictObject({
		edit: z.literal('cells'),
		cells: z
			.array(
				z.strictObject({
					visit: keySchema,
					measure: keySchema,
					on: z.boolean(),
					at: place.optional()
				})
			)
			.min(1)
			.max(20_000)
	})
]);
export type Edit = z.output<typeof editInput>;
export type CellEdit = Extract<Edit, { edit: 'cells' }>['cells'][number];

export const editDraftInput = z.strictObject({
	edits: z.array(editInput).min(1, 'Say what is to be changed.').max(1000)
});
export type EditDraftInput = z.output<typeof editDraftInput>;
