import type { ParamMatcher } from '@sveltejs/kit';
import { isId } from '$lib/id';

/** Keeps rubbish out of every load: an id is a lower-case UUID or the route does not exist. */
export const match = ((value) => isId(value)) satisfies ParamMatcher;
