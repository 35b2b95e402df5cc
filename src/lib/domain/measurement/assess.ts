import { convert, converts, numberText, quantityText, roundTo } from '../../units/convert';
import { isUnit, unitText, type UnitCode } from '../../units/units';
import { findPlainDate, type PlainDate } from '../../time/dates';
import { problem, type Problem } from '../problems';
import type { Measure, NumberMeasure } from '../study/definition';
import { decimalOf, readDecimal } from './decimal';
import { summarise } from './summary';

/** What a person or a program says was measured. Texts are taken as typed. */
export type Entry =
	| { kind: 'value'; value: string | number; unit?: string }
	| { kind: 'readings'; values: readonly (string | number)[]; unit?: string }
	| { kind: 'not done'; reason: string };

/** What is kept of an entry. Numbers are in the measure's own unit; `entered` is what was typed. */
export type Assessed =
	| { kind: 'number'; value: number; unit: UnitCode; entered: Entered }
	| { kind: 'repeated'; value: number; unit: UnitCode; readings: number[]; entered: Entered }
	| { kind: 'choice'; value: string }
	| { kind: 'date'; value: PlainDate }
	| { kind: 'text'; value: string }
	| { kind: 'not done'; reason: string };

export type Entered = { texts: string[]; unit: UnitCode };

export type Assessment =
	| { result: 'ok'; value: Assessed }
	/** Cannot be kept as it is. */
	| { result: 'refused'; problem: Problem }
	/** Possible but unusual: kept once the person has looked again and said so. */
	| { result: 'ask'; value: Assessed; problems: Problem[] };

/** What the rules may know of the subject and the day. Earlier values are in the measure's own unit. */
export type Context = { today: PlainDate; last?: number | null; baseline?: number | null };

const refused = (reason: Problem): Assessment => ({ result: 'refused', problem: reason });
const fine = (value: Assessed): Assessment => ({ result: 'ok', value });

const shown = (text: string) => (text.length > 40 ? `${text.slice(0, 40)}…` : text);

/** Characters that no text of ours keeps: controls (but line breaks and tabs) and halves of characters. */
export function holdsForbidden(text: string): boolean {
	if (!text.isWellFormed()) return true;
	for (let at = 0; at < text.length; at++) {
		const code = text.charCodeAt(at);
		if (code < 32 ? code !== 9 && code !== 10 && code !== 13 : code >= 127 && code <= 159)
			return true;
	}
	return false;
}

/** Whether an entry can be kept for a measure, has to be looked at again, or is refused. */
export function assess(measure: Measure, entry: Entry, context: Context): Assessment {
	if (measure.kind === 'derived')
		return refused(problem('DERIVED_NOT_ENTERED', { measure: measure.name }));
	if (entry.kind === 'not done')
		return measure.notDoneReasons.includes(entry.reason)
			? fine({ kind: 'not done', reason: entry.reason })
			: refused(problem('NOT_DONE_REASON'));
	if (measure.kind === 'repeated') {
		if (entry.kind !== 'readings')
			return refused(
				problem('READINGS_WRONG', {
					given: 1,
					readings: measure.readings,
					needed: measure.readingsNeeded
				})
			);
		return assessNumbers(measure, entry.values, entry.unit, context);
	}
	if (entry.kind === 'readings')
		return refused(
			problem('READINGS_WRONG', { given: entry.values.length, readings: 1, needed: 1 })
		);
	if (measure.kind === 'number') return assessNumbers(measure, [entry.value], entry.unit, context);

	const text = String(entry.value);
	if (text.trim() === '') return refused(problem('VALUE_MISSING'));
	if (holdsForbidden(text)) return refused(problem('TEXT_NOT_ALLOWED'));
	switch (measure.kind) {
		case 'choice':
			return measure.choices.some((choice) => choice.key === text)
				? fine({ kind: 'choice', value: text })
				: refused(problem('NOT_A_CHOICE', { text: shown(text) }));
		case 'date':
			return assessDate(text.trim(), measure.future, context.today);
		case 'text': {
			const length = [...text].length;
			return length > measure.maxLength
				? refused(problem('TEXT_TOO_LONG', { length, limit: measure.maxLength }))
				: fine({ kind: 'text', value: text.normalize('NFC') });
		}
	}
}

function assessDate(text: string, future: boolean, today: PlainDate): Assessment {
	if (!/^\d{4}-\d{2}-\d{2}$/.test(text))
		return refused(problem('DATE_SHAPE', { text: shown(text) }));
	const date = findPlainDate(text);
	if (date === null) return refused(problem('DATE_NOT_REAL', { text }));
	if (!future && date > today) return refused(problem('DATE_IN_FUTURE', { text }));
	return fine({ kind: 'date', value: date });
}

function assessNumbers(
	measure: NumberMeasure,
	given: readonly (string | number)[],
	givenUnit: string | undefined,
	context: Context
): Assessment {
	const unit = givenUnit ?? measure.unit;
	if (
		!isUnit(unit) ||
		(unit !== measure.unit && !measure.alsoIn?.includes(unit)) ||
		!converts(unit, measure.unit, measure.analyte)
	)
		return refused(problem('UNIT_NOT_ACCEPTED', { measure: measure.name, unit: shown(unit) }));

	const repeated = measure.kind === 'repeated';
	// A reading left open is no reading; a single value left open is missing.
	const filled = given.filter((value) => String(value).trim() !== '');
	if (filled.length === 0) return refused(problem('VALUE_MISSING'));
	if (repeated && (filled.length < measure.readingsNeeded || given.length > measure.readings))
		return refused(
			problem('READINGS_WRONG', {
				given: filled.length,
				readings: measure.readings,
				needed: measure.readingsNeeded
			})
		);

	const values: number[] = [];
	for (const value of filled) {
		const text = String(value);
		const read = typeof value === 'number' ? decimalOf(value) : readDecimal(value);
		if (read === null) return refused(problem('NOT_A_NUMBER', { text: shown(text) }));
		// A value in another unit has that unit's digits; it is rounded to the measure's own once converted.
		if (unit === measure.unit && read.decimals > measure.decimals)
			return refused(
				problem('TOO_MANY_DECIMALS', { text: shown(text), decimals: measure.decimals })
			);
		const converted = convert(read.value, unit, measure.unit, measure.analyte);
		const kept = unit === measure.unit ? read.value : roundTo(converted, measure.decimals);
		const outside = checkHardLimits(measure, kept);
		if (outside) return refused(outside);
		values.push(kept);
	}

	const value = repeated
		? roundTo(summarise(values, measure.summary), measure.summaryDecimals)
		: (values[0] as number);
	const entered = { texts: filled.map((each) => String(each).trim()), unit };
	const assessed: Assessed = repeated
		? { kind: 'repeated', value, unit: measure.unit, readings: values, entered }
		: { kind: 'number', value, unit: measure.unit, entered };
	const problems = checkSoftLimits(measure, values, value, context);
	return problems.length === 0 ? fine(assessed) : { result: 'ask', value: assessed, problems };
}

function checkHardLimits(measure: NumberMeasure, value: number): Problem<'HARD_LIMIT'> | null {
	const { hardLow, hardHigh } = measure;
	const low = hardLow !== undefined && value < hardLow;
	const high = hardHigh !== undefined && value > hardHigh;
	if (!low && !high) return null;
	const unit = unitText(measure.unit);
	const ends = [hardLow, hardHigh].map((end) =>
		end === undefined ? null : numberText(end, decimalOf(end)?.decimals ?? 0)
	);
	const range =
		ends[0] && ends[1]
			? `${ends[0]} to ${ends[1]} ${unit}`
			: ends[0]
				? `${ends[0]} ${unit} or more`
				: `${ends[1]} ${unit} or less`;
	return problem('HARD_LIMIT', {
		value: quantityText(value, measure.unit, measure.decimals),
		range: range.trim()
	});
}

/** The sentences name the value but not the limits: what is usual must not steer the second look. */
function checkSoftLimits(
	measure: NumberMeasure,
	readings: readonly number[],
	value: number,
	context: Context
): Problem[] {
	const problems: Problem[] = [];
	const { softLow, softHigh, softChange } = measure;
	const unusual = readings.find(
		(reading) =>
			(softLow !== undefined && reading < softLow) || (softHigh !== undefined && reading > softHigh)
	);
	if (unusual !== undefined)
		problems.push(
			problem('SOFT_LIMIT', { value: quantityText(unusual, measure.unit, measure.decimals) })
		);
	const before = softChange?.from === 'baseline' ? context.baseline : context.last;
	if (softChange && typeof before === 'number' && changesMuch(value, before, measure, softChange))
		problems.push(
			problem('SOFT_CHANGE', { value: quantityText(value, measure.unit, measure.decimals) })
		);
	return problems;
}

/** Per cent are counted on the measure's scale: on the log scale up by 50 % is as far as down to two thirds. */
function changesMuch(
	value: number,
	before: number,
	{ scale }: NumberMeasure,
	{ by, size }: NonNullable<NumberMeasure['softChange']>
): boolean {
	const [change, most] =
		by === 'percent' && scale === 'log' && value > 0 && before > 0
			? [Math.abs(Math.log(value / before)), Math.log1p(size / 100)]
			: [Math.abs(value - before), by === 'percent' ? (Math.abs(before) * size) / 100 : size];
	return change > most * (1 + 1e-12);
}
