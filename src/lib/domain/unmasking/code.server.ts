import { createHash, randomInt } from 'node:crypto';
import { codeLength, codeLetters } from './code';

/** A new code of the platform's secure generator: 30¹⁰, nearly 2⁴⁹, to be guessed at five tries in a quarter of an hour. */
export const newCode = (): string =>
	Array.from({ length: codeLength }, () => codeLetters[randomInt(codeLetters.length)]).join('');

/** What is kept of a code: bound to the study and the kit, so that it fits nowhere else. */
export const hashOfCode = (studyId: string, kit: string, code: string): string =>
	createHash('sha256').update(`${studyId}\0${kit}\0${code}`).digest('hex');
