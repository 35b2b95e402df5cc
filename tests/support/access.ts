import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import { root } from '../../scripts/lib/places.mjs';

/** Route, method, who: 'everyone', 'signed in', or roles. Written by hand. */
export type ExpectedAccess = Record<string, Record<string, string | string[]>>;

export const expectedAccess = JSON.parse(
	readFileSync(join(root, 'tests/http/expected-access.json'), 'utf8')
) as ExpectedAccess;

/** Somebody who may come in there. */
export function whoMay(routeId: string, method: string): string {
	const allowed = expectedAccess[routeId]?.[method];
	if (allowed === undefined) throw new Error(`${method} ${routeId} is not in expected-access.json`);
	if (typeof allowed === 'string') return 'administrator';
	return allowed[0] as string;
}
