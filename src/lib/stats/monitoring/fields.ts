import { StatsError } from '../errors.js';

/** Reading of plans written by people: each refusal names the place in the plan and what may stand there. */

export type Fields = Readonly<Record<string, unknown>>;

export function refuseField(path: string, sentence: string): never {
	throw new StatsError('bad-option', `${path || 'The plan'} ${sentence}`, { path });
}

const shown = (value: unknown) => {
	const text = JSON.stringify(value) ?? String(value);
	return text.length > 60 ? `${text.slice(0, 57)}…` : text;
};

/** The value as an object whose keys are all known. */
export function fieldsOf(value: unknown, path: string, known: readonly string[]): Fields {
	if (typeof value !== 'object' || value === null || Array.isArray(value))
		refuseField(path, `must be an object with the keys ${known.join(', ')}, not ${shown(value)}.`);
	for (const key of Object.keys(value))
		if (!known.includes(key))
			refuseField(
				path ? `${path}.${key}` : key,
				`is not known here. The keys are ${known.join(', ')}.`
			);
	return value as Fields;
}

export const at = (path: string, key: string) => (path ? `${path}.${key}` : key);

export interface Range {
	above?: number;
	from?: number;
	below?: number;
	to?: number;
	whole?: boolean;
}

function describe({ above, from, below, to, whole }: Range): string {
	const parts = [
		above === undefined ? '' : `above ${above}`,
		from === undefined ? '' : `at least ${from}`,
		below === undefined ? '' : `below ${below}`,
		to === undefined ? '' : `at most ${to}`
	].filter(Boolean);
	return `a ${whole ? 'whole ' : ''}number${parts.length ? ` ${parts.join(' and ')}` : ''}`;
}

/** A finite number in its range. */
export function numberIn(value: unknown, path: string, range: Range = {}): number {
	const { above, from, below, to, whole } = range;
	if (
		typeof value !== 'number' ||
		!Number.isFinite(value) ||
		(whole && !Number.isInteger(value)) ||
		(above !== undefined && !(value > above)) ||
		(from !== undefined && !(value >= from)) ||
		(below !== undefined && !(value < below)) ||
		(to !== undefined && !(value <= to))
	)
		refuseField(
			path,
			value === undefined
				? `is missing: it must be ${describe(range)}.`
				: `must be ${describe(range)}, not ${shown(value)}.`
		);
	return value;
}

/** A list of finite numbers. */
export function numbersIn(value: unknown, path: string, range: Range = {}): number[] {
	if (!Array.isArray(value))
		refuseField(
			path,
			value === undefined
				? 'is missing: it must be a list of numbers.'
				: `must be a list of numbers, not ${shown(value)}.`
		);
	return value.map((item, i) => numberIn(item, `${path}[${i}]`, range));
}

/** One of the values allowed. */
export function oneOf<T extends string | number>(
	value: unknown,
	path: string,
	allowed: readonly T[]
): T {
	if (!allowed.includes(value as T))
		refuseField(
			path,
			value === undefined
				? `is missing: it must be one of ${allowed.join(', ')}.`
				: `must be one of ${allowed.join(', ')}, not ${shown(value)}.`
		);
	return value as T;
}
