import { expect, test } from 'vitest';
import { onlyVersionDiffers } from './typed';

test('a form whose fields the server left alone may take the new version of its record', () => {
	const before = { version: 3, reason: '', answer: 'yes' };
	expect(onlyVersionDiffers(before, { answer: 'yes', reason: '', version: 4 })).toBe(true);
	expect(onlyVersionDiffers(before, { ...before, answer: 'no' })).toBe(false);
	expect(onlyVersionDiffers(before, { ...before, another: 1 })).toBe(false);
});
