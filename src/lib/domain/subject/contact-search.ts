/** Letters that no accent sign can be taken off. Common practice in name searches. */
const spelled: Record<string, string> = {
	ß: 'ss',
	æ: 'ae',
	œ: 'oe',
	ø: 'o',
	ł: 'l',
	đ: 'd',
	ð: 'd',
	þ: 'th',
	ı: 'i'
};

/** A name without accents and case: 'Zoë Łukasz-Ångström' becomes 'zoe lukasz-angstrom'. */
export const foldName = (name: string): string =>
	name
		.normalize('NFD')
		.replace(/\p{M}/gu, '')
		.toLowerCase()
		.replace(/[ßæœøłđðþı]/g, (letter) => spelled[letter] ?? letter);

const words = (name: string): string[] =>
	foldName(name)
		.split(/[^\p{L}\p{N}]+/u)
		.filter(Boolean);

/** Whether each word that was asked for begins a word of the name, in whatever order. */
export function matchesName(name: string, asked: string): boolean {
	const own = words(name);
	const wanted = words(asked);
	return wanted.length > 0 && wanted.every((word) => own.some((each) => each.startsWith(word)));
}
