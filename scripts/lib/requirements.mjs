/**
 * The rows of the requirement list.
 * @param {string} markdown
 * @returns {{ id: string, requirement: string, source: string, how: string }[]}
 */
export function requirementsIn(markdown) {
	return markdown.split('\n').flatMap((line) => {
		const [, id, requirement, source, how] =
			/^\|\s*(R-\d+)\s*\|(.*?)\|(.*?)\|(.*?)\|\s*$/.exec(line) ?? [];
		return id
			? [
					{
						id,
						requirement: String(requirement).trim(),
						source: String(source).trim(),
						how: String(how).trim()
					}
				]
			: [];
	});
}

/** Ids carried by a test's title: `R-34: …` or `R-34, R-35: …` at the start of any of its parts. @param {string} title */
export const idsIn = (title) =>
	[...title.matchAll(/(?:^|[›>] ?)((?:R-\d+(?:, | and )?)+):/g)].flatMap(
		(match) => (match[1] ?? '').match(/R-\d+/g) ?? []
	);
