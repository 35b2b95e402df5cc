import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import { checkPassword, normalisePassword } from './password';

const code = (text: string, context: string[] = []) => checkPassword(text, context)?.code ?? null;

describe('passwords', () => {
	it('have 15 to 256 characters, counted as people count them', () => {
		expect(code('moss lantern ki')).toBeNull();
		expect(code('moss lantern k')).toBe('PASSWORD_TOO_SHORT');
		expect(code('')).toBe('PASSWORD_TOO_SHORT');
		const long = 'moss lantern kiln '.repeat(15).slice(0, 256);
		expect(code(long)).toBeNull();
		expect(code(`${long}x`)).toBe('PASSWORD_TOO_LONG');
		// Fourteen characters, one of them typed as two code points, one as a surrogate pair.
		expect(code('e\u0301🙂abcdefghzqxw')).toBe('PASSWORD_TOO_SHORT');
		expect(code('e\u0301🙂abcdefghzqxwv')).toBeNull();
	});

	it('may hold any characters, spaces at the ends included', () => {
		for (const text of [
			'  moss   lantern  ',
			'ткацкий станок утром',
			'織機の朝の光と影を見ている人々',
			'83 629 174 650 283',
			'🧵🪡🧶🐑🌾🌿🍂🪵🏔🌊🌧🌙⭐🔥🪨'
		])
			expect(code(text), text).toBeNull();
	});

	it('are the same from any keyboard', () => {
		expect(normalisePassword('cafe\u0301')).toBe(normalisePassword('caf\u00e9'));
		expect(normalisePassword('ﬁ')).toBe('ﬁ');
	});

	it.each([
		'passwordpassword',
		'PasswordPassword1!',
		'Password Password 2026',
		'123456789012345',
		'qwertyuiopasdfgh',
		'zyxwvutsrqponml',
		'aaaaaaaaaaaaaaaaaaa',
		'abcabcabcabcabcabc',
		'correct horse battery staple',
		'1q2w3e4r5t6y7u8i',
		'welcomeadmin12345',
		'121212121212121212'
	])('%s is too common', (text) => {
		expect(code(text)).toBe('PASSWORD_COMMON');
	});

	it.each([
		['heddleheddle2026!', []],
		['AnnaWeaver198001!', ['Anna Weaver']],
		['anna.weaver@example.org', ['anna.weaver@example.org']],
		['weaver-example-99', ['anna.weaver@example.org']],
		['AMR-01amr-01amr-01x', ['AMR-01']]
	])('%s is made of what is known', (text, context) => {
		expect(code(text, context)).toBe('PASSWORD_CONTEXT');
	});

	it('a known word among others is no harm', () => {
		expect(code('Anna paints kettles', ['Anna Weaver'])).toBeNull();
		expect(code('my heddle is made of ash')).toBeNull();
	});

	it('half a character is refused, and nothing throws', () => {
		expect(code(`moss lantern kiln \ud800`)).toBe('TEXT_NOT_ALLOWED');
		fc.assert(
			fc.property(
				fc.string({ unit: 'binary', maxLength: 300 }),
				fc.array(fc.string()),
				(text, context) => {
					const found = checkPassword(text, context);
					if (found) expect(found.message.length).toBeGreaterThan(10);
				}
			)
		);
	});

	it('the problem never repeats the password', () => {
		const found = checkPassword('passwordpassword');
		expect(JSON.stringify(found)).not.toContain('passwordpassword');
	});
});
