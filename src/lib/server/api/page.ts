import { z } from 'zod';

/** A page of a list ordered by id, newest first: the cursor is the last id seen. */
export const pageQuery = z.strictObject({
	cursor: z.uuid('This is no place in the list.').optional(),
	limit: z.coerce.number().int().min(1).max(100).default(50)
});
export type PageQuery = z.output<typeof pageQuery>;

export interface Page<T> {
	items: T[];
	/** Null at the end of the list. */
	nextCursor: string | null;
}

/** Cuts the one row too many that was read to learn whether there is more. */
export function pageOf<T>(rows: T[], limit: number, cursorOf: (row: T) => string): Page<T> {
	const items = rows.slice(0, limit);
	const last = items.at(-1);
	return { items, nextCursor: rows.length > limit && last ? cursorOf(last) : null };
}

/** A page of a list that is short enough to be read whole, newest first. */
export function listed<T extends { id: string }>(all: readonly T[], query: PageQuery): Page<T> {
	const { cursor } = query;
	const rest = cursor === undefined ? all : all.filter(({ id }) => id < cursor);
	return pageOf(rest.slice(0, query.limit + 1), query.limit, ({ id }) => id);
}
