import { bad, good, problem, type Problem, type Result } from '../problems';
import { luhnDigit } from '../subject/number';

/** Kit numbers: five digits or more and a check digit, 'K48213-6'. They say nothing of what the kit holds. */
export type KitNumber = string;

export function kitNumber(running: number, digits: number): KitNumber {
	const text = String(running).padStart(digits, '0');
	return `K${text}-${luhnDigit(text)}`;
}

/** Reads a kit number as people type it: with or without the K and the hyphen. */
export function readKitNumber(
	text: string
): Result<KitNumber, Problem<'KIT_NUMBER_SHAPE' | 'KIT_NUMBER_CHECK_DIGIT'>> {
	const typed = text.trim();
	const shown = typed.slice(0, 20);
	const match = /^[Kk]?(\d{5,9})[-–−\s]?(\d)$/.exec(typed);
	const [, digits = '', check = ''] = match ?? [];
	if (!match) return bad(problem('KIT_NUMBER_SHAPE', { text: shown }));
	if (luhnDigit(digits) !== Number(check))
		return bad(problem('KIT_NUMBER_CHECK_DIGIT', { text: shown }));
	return good(`K${digits}-${check}`);
}
