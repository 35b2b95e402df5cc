import { problem, type Problem } from '../problems';

/**
 * Passwords: length counts, nothing about kinds of characters, no forced change (NIST SP 800-63B rev. 4;
 * OWASP ASVS 5.0.0, 6.2.1 to 6.2.12). 15 characters, because a password may be the only factor.
 */
export const leastPasswordLength = 15;
export const mostPasswordLength = 256;

/**
 * The form in which a password is counted, hashed and compared: Unicode NFC, so that the same typed text from two
 * keyboards is the same password. NFC rather than NFKC: it changes no character into another.
 */
export const normalisePassword = (text: string): string => text.normalize('NFC');

/** Of long passwords that are often seen in leaks, and of the words such passwords are made from. */
const common = new Set([
	'123456789012345',
	'1234567890123456',
	'12345678901234567890',
	'987654321987654321',
	'passwordpassword',
	'passwordpassword1',
	'password123456789',
	'password12345678',
	'passw0rdpassw0rd',
	'iloveyouiloveyou',
	'iloveyou123456789',
	'qwertyuiopasdfgh',
	'qwertyuiopasdfghjkl',
	'qwertyuiopasdfghjklzxcvbnm',
	'1qaz2wsx3edc4rfv',
	'1q2w3e4r5t6y7u8i',
	'1q2w3e4r5t6y7u8i9o0p',
	'zaq12wsxcde34rfv',
	'q1w2e3r4t5y6u7i8',
	'correcthorsebatterystaple',
	'correct horse battery staple',
	'thisismypassword',
	'this is my password',
	'mypasswordispassword',
	'letmeinletmeinletmein',
	'letmeinpleaseletmein',
	'changemechangeme',
	'changeme123456789',
	'administrator123',
	'administrator1234',
	'welcomewelcome123',
	'abcdefghijklmnop',
	'abcdefghijklmnopqrstuvwxyz',
	'abcd1234abcd1234',
	'abc123abc123abc123',
	'trustno1trustno1',
	'superman123456789',
	'princess123456789',
	'football123456789',
	'sunshine123456789'
]);
const commonWords = [
	'password',
	'passwort',
	'passw0rd',
	'p@ssw0rd',
	'p@ssword',
	'pa$$word',
	'letmein',
	'welcome',
	'changeme',
	'iloveyou',
	'qwerty',
	'qwertz',
	'azerty',
	'admin',
	'administrator',
	'secret',
	'login',
	'monkey',
	'dragon',
	'sunshine',
	'princess',
	'football'
];
const rows = [
	'abcdefghijklmnopqrstuvwxyz',
	'01234567890123456789',
	'qwertyuiopasdfghjklzxcvbnm',
	'qwertzuiopasdfghjklyxcvbnm',
	'azertyuiopqsdfghjklmwxcvbn'
];
const programWords = ['heddle'];

const reversed = (text: string) => [...text].reverse().join('');

/** 'abcabcabcabcabc': a short piece again and again. */
function repeatsShortPiece(text: string): boolean {
	for (let size = 1; size <= 5; size++)
		if (
			text ===
			text
				.slice(0, size)
				.repeat(Math.ceil(text.length / size))
				.slice(0, text.length)
		)
			return true;
	return false;
}

/**
 * What is left when the words are taken out, longest first, and then digits and marks at either end.
 * A text that holds none of the words is left as it is: digits and marks alone may be a good password.
 */
function without(text: string, words: readonly string[]): string {
	let left = text;
	for (const word of [...words].sort((a, b) => b.length - a.length))
		if (word.length >= 3) left = left.replaceAll(word, '');
	if (left === text) return text;
	return left.replace(/^[^\p{L}]+|[^\p{L}]+$/gu, '');
}

/** Parts of names and addresses worth looking for: 'anna.weaver@example.org' → anna, weaver, example. */
function wordsOf(texts: readonly string[]): string[] {
	return texts.flatMap((text) => {
		const lower = text.normalize('NFC').toLowerCase();
		return [lower, ...lower.split(/[^\p{L}\p{N}]+/u)].filter((word) => word.length >= 3);
	});
}

/**
 * Why the text cannot be a password, or null. `context` is what a guesser would know of the person:
 * name, e-mail address, study codes.
 */
export function checkPassword(
	text: string,
	context: readonly string[] = []
): Problem<
	| 'PASSWORD_TOO_SHORT'
	| 'PASSWORD_TOO_LONG'
	| 'PASSWORD_COMMON'
	| 'PASSWORD_CONTEXT'
	| 'TEXT_NOT_ALLOWED'
> | null {
	if (!text.isWellFormed()) return problem('TEXT_NOT_ALLOWED');
	const password = normalisePassword(text);
	const length = [...password].length;
	if (length < leastPasswordLength)
		return problem('PASSWORD_TOO_SHORT', { least: leastPasswordLength });
	if (length > mostPasswordLength)
		return problem('PASSWORD_TOO_LONG', { most: mostPasswordLength });

	const lower = password.toLowerCase();
	const packed = lower.replace(/\s+/g, '');
	if (common.has(lower) || common.has(packed)) return problem('PASSWORD_COMMON');
	if (new Set(packed).size < 5 || repeatsShortPiece(packed)) return problem('PASSWORD_COMMON');
	if (rows.some((row) => row.includes(packed) || reversed(row).includes(packed)))
		return problem('PASSWORD_COMMON');
	if (without(packed, commonWords).length < 4) return problem('PASSWORD_COMMON');
	if (without(packed, [...wordsOf([...context, ...programWords]), ...commonWords]).length < 4)
		return problem('PASSWORD_CONTEXT');
	return null;
}
