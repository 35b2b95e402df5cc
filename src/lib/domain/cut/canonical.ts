/**
 * One text for one content: JSON by RFC 8785 (JSON Canonicalization Scheme). Keys are sorted by UTF-16 code units,
 * numbers are written as ECMAScript writes them, nothing stands between tokens. What JSON cannot hold is refused,
 * so that no value is silently changed on its way into a fingerprint.
 */
export type Json =
	null | boolean | number | string | readonly Json[] | { readonly [key: string]: Json };

function stringText(text: string): string {
	if (!text.isWellFormed())
		throw new TypeError('A text with half a character has no canonical form');
	return JSON.stringify(text);
}

function numberText(value: number): string {
	if (!Number.isFinite(value)) throw new TypeError(`${value} has no canonical form`);
	// JSON.stringify writes −0 as 0, as the RFC asks.
	return JSON.stringify(value);
}

function write(value: Json, parts: string[]): void {
	switch (typeof value) {
		case 'string':
			parts.push(stringText(value));
			return;
		case 'number':
			parts.push(numberText(value));
			return;
		case 'boolean':
			parts.push(value ? 'true' : 'false');
			return;
		case 'object':
			break;
		default:
			throw new TypeError(`A ${typeof value} has no canonical form`);
	}
	if (value === null) {
		parts.push('null');
	} else if (Array.isArray(value)) {
		parts.push('[');
		for (let at = 0; at < value.length; at++) {
			if (at > 0) parts.push(',');
			write(value[at] as Json, parts);
		}
		parts.push(']');
	} else {
		const prototype: unknown = Object.getPrototypeOf(value);
		if (prototype !== Object.prototype && prototype !== null)
			throw new TypeError('Only plain objects have a canonical form');
		const object = value as { readonly [key: string]: Json };
		parts.push('{');
		// The default order of sort() is that of UTF-16 code units.
		Object.keys(object)
			.sort()
			.forEach((key, at) => {
				if (at > 0) parts.push(',');
				parts.push(stringText(key), ':');
				write(object[key] as Json, parts);
			});
		parts.push('}');
	}
}

/** The canonical text. Throws a TypeError for NaN, infinities, undefined, dates and other things JSON does not hold. */
export function canonical(value: Json): string {
	const parts: string[] = [];
	write(value, parts);
	return parts.join('');
}

/** SHA-256 of the text’s UTF-8 bytes, as 64 hexadecimal digits; in the browser and in Node. */
export async function fingerprint(text: string): Promise<string> {
	const hash = await globalThis.crypto.subtle.digest('SHA-256', new TextEncoder().encode(text));
	return Array.from(new Uint8Array(hash), (byte) => byte.toString(16).padStart(2, '0')).join('');
}

/** '3f2a 91c0 …': the first sixteen digits in groups, to be read out and compared by eye. */
export function shortFingerprint(hash: string): string {
	return (hash.slice(0, 16).match(/.{4}/g) ?? []).join(' ');
}
