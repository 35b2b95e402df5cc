import { bad, good, problem, type Problem, type Result } from '../problems';

/**
 * Subject numbers: two digits for the site, a running number of four, and a check digit over all six: 02-0017-0.
 * The check digit is the Luhn formula of ISO/IEC 7812-1, annex B: it catches every single wrong digit and every swap
 * of neighbours except 0 and 9.
 */
export type SubjectNumber = string;

/** The check digit that belongs after `digits`. */
export function luhnDigit(digits: string): number {
	if (!/^\d+$/.test(digits)) throw new RangeError('Only digits have a check digit');
	let total = 0;
	for (let place = 0; place < digits.length; place++) {
		const digit = Number(digits[digits.length - 1 - place]);
		const weighted = place % 2 === 0 ? digit * 2 : digit;
		total += weighted > 9 ? weighted - 9 : weighted;
	}
	return (10 - (total % 10)) % 10;
}

export const fitsLuhn = (digits: string): boolean =>
	/^\d{2,}$/.test(digits) && luhnDigit(digits.slice(0, -1)) === Number(digits.at(-1));

export const mostSubjectsPerSite = 9999;

/** '02-0017-0' for site '02' and running number 17. */
export function subjectNumber(siteCode: string, running: number): SubjectNumber {
	if (!/^\d{2}$/.test(siteCode)) throw new RangeError(`Not a site code: ${siteCode}`);
	if (!Number.isSafeInteger(running) || running < 1 || running > mostSubjectsPerSite)
		throw new RangeError(`Not a running number: ${running}`);
	const digits = `${siteCode}${String(running).padStart(4, '0')}`;
	return `${siteCode}-${digits.slice(2)}-${luhnDigit(digits)}`;
}

export type SubjectNumberParts = { number: SubjectNumber; site: string; running: number };

/** Reads a number as people type it: hyphens, dashes or spaces between the parts, or none. */
export function readSubjectNumber(
	text: string
): Result<SubjectNumberParts, Problem<'SUBJECT_NUMBER_SHAPE' | 'SUBJECT_NUMBER_CHECK_DIGIT'>> {
	const typed = text.trim();
	const shown = typed.slice(0, 20);
	const match = /^(\d{2})[-–−\s]?(\d{4})[-–−\s]?(\d)$/.exec(typed);
	const [, site = '', running = '', check = ''] = match ?? [];
	if (!match || running === '0000') return bad(problem('SUBJECT_NUMBER_SHAPE', { text: shown }));
	if (luhnDigit(site + running) !== Number(check))
		return bad(problem('SUBJECT_NUMBER_CHECK_DIGIT', { text: shown }));
	return good({ number: `${site}-${running}-${check}`, site, running: Number(running) });
}
