/** A value as text, the same for the same content whatever the order of fields; fields without a value do not count. */
export function plainText(value: unknown): string {
	return (
		JSON.stringify(value, (_, inner: unknown) =>
			typeof inner === 'object' && inner !== null && !Array.isArray(inner)
				? Object.fromEntries(
						Object.entries(inner)
							.filter(([, each]) => each !== undefined)
							.sort(([a], [b]) => (a < b ? -1 : 1))
					)
				: inner
		) ?? 'nothing'
	);
}

export const same = (a: unknown, b: unknown): boolean => a === b || plainText(a) === plainText(b);

/** Names of the fields in which two records differ. */
export function differingFields(a: object, b: object): string[] {
	const [before, after] = [a as Record<string, unknown>, b as Record<string, unknown>];
	return [...new Set([...Object.keys(before), ...Object.keys(after)])].filter(
		(name) => !same(before[name], after[name])
	);
}
