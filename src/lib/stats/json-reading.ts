import { StatsError } from './errors.js';

/**
 * Readers of values that came as JSON: each returns the value as its type, or refuses with a sentence that names where
 * it stands (`path`, as `mean.covariates[1].kind`) and what is allowed there.
 */
export type Reader<T> = (value: unknown, path: string) => T;

const inWords = (value: unknown): string => {
	if (value === undefined) return 'missing';
	if (typeof value === 'string') return `“${value}”`;
	if (Array.isArray(value)) return 'a list';
	return typeof value === 'object' && value !== null ? 'an object' : String(value);
};

/** The refusal of a value: where, what it is, what is allowed. */
export function refusal(path: string, value: unknown, allowed: string): StatsError {
	return new StatsError(
		'bad-plan',
		path === ''
			? `The plan is ${inWords(value)}; it must be ${allowed}.`
			: `In the plan, ${path} is ${inWords(value)}; it must be ${allowed}.`,
		{ path }
	);
}

/** Text that is not empty. */
export const text: Reader<string> = (value, path) => {
	if (typeof value === 'string' && value !== '') return value;
	throw refusal(path, value, 'text that is not empty');
};

export const yesOrNo: Reader<boolean> = (value, path) => {
	if (typeof value === 'boolean') return value;
	throw refusal(path, value, 'true or false');
};

export const finiteNumber: Reader<number> = (value, path) => {
	if (typeof value === 'number' && Number.isFinite(value)) return value;
	throw refusal(path, value, 'a finite number');
};

export const wholeNumber =
	(from: number, to: number): Reader<number> =>
	(value, path) => {
		if (Number.isInteger(value) && (value as number) >= from && (value as number) <= to)
			return value as number;
		throw refusal(path, value, `a whole number from ${from} to ${to}`);
	};

export const oneOf =
	<const T extends string>(...allowed: readonly T[]): Reader<T> =>
	(value, path) => {
		if (allowed.includes(value as T)) return value as T;
		const quoted = allowed.map((a) => `“${a}”`);
		throw refusal(
			path,
			value,
			quoted.length === 1 ? quoted[0]! : `${quoted.slice(0, -1).join(', ')} or ${quoted.at(-1)}`
		);
	};

/** A value that may be left out or null. */
export const orNull =
	<T>(read: Reader<T>): Reader<T | null> =>
	(value, path) =>
		value === undefined || value === null ? null : read(value, path);

/** A value that may be left out. */
export const or =
	<T>(read: Reader<T>, fallback: T): Reader<T> =>
	(value, path) =>
		value === undefined ? fallback : read(value, path);

export const listOf =
	<T>(read: Reader<T>, fewest = 0): Reader<T[]> =>
	(value, path) => {
		if (!Array.isArray(value) || value.length < fewest)
			throw refusal(path, value, fewest > 0 ? 'a list that is not empty' : 'a list');
		return value.map((item, i) => read(item, `${path}[${i}]`));
	};

/** Whether a value is an object with keys. */
export function isObject(value: unknown): value is Record<string, unknown> {
	return typeof value === 'object' && value !== null && !Array.isArray(value);
}

const join = (path: string, key: string) => (path === '' ? key : `${path}.${key}`);

/** An object of just these keys, each read by its reader; a key that is not known is refused. */
export const objectOf =
	<T extends object>(readers: { [K in keyof T]: Reader<T[K]> }): Reader<T> =>
	(value, path) => {
		const known = Object.keys(readers);
		if (!isObject(value)) throw refusal(path, value, `an object with ${known.join(', ')}`);
		const stranger = Object.keys(value).find((key) => !known.includes(key));
		if (stranger !== undefined) {
			throw new StatsError(
				'bad-plan',
				`In the plan, ${join(path, stranger)} is not known; ${path === '' ? 'a plan' : path} may hold ${known.join(', ')}.`,
				{ path: join(path, stranger) }
			);
		}
		const result: Partial<T> = {};
		for (const key of known as (keyof T & string)[])
			result[key] = readers[key](value[key], join(path, key));
		return result as T;
	};

/** An object of any keys, each with a value of one kind. */
export const recordOf =
	<T>(read: Reader<T>, allowed: string): Reader<Record<string, T>> =>
	(value, path) => {
		if (!isObject(value) || Object.keys(value).length === 0) throw refusal(path, value, allowed);
		return Object.fromEntries(
			Object.entries(value).map(([key, item]) => [key, read(item, `${path}[“${key}”]`)])
		);
	};
