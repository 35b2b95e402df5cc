/** Whether what the server says of a form's fields is the same before and after, the record's version aside. */
export function onlyVersionDiffers(
	before: Record<string, unknown>,
	after: Record<string, unknown>
): boolean {
	const rest = ({ version: _, ...others }: Record<string, unknown>) =>
		JSON.stringify(Object.entries(others).sort(([a], [b]) => (a < b ? -1 : 1)));
	return rest(before) === rest(after);
}
