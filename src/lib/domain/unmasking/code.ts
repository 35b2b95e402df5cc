/** Sealed codes: ten letters and digits without those that are taken for one another, in two groups. */
export const codeLetters = '23456789ABCDEFGHJKMNPQRSTVWXYZ';
export const codeLength = 10;

/** A code as people type it, in capitals without spaces or hyphens; null when it cannot be one. */
export function readCode(text: string): string | null {
	const bare = text.toUpperCase().replace(/[\s\-–−]/g, '');
	return bare.length === codeLength && [...bare].every((each) => codeLetters.includes(each))
		? bare
		: null;
}

export const codeText = (code: string): string => `${code.slice(0, 5)}-${code.slice(5)}`;
