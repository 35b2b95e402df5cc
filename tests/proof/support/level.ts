/**
 * Puts what belongs to one request, one session or one moment in the place of a word, so that two answers can be compared
 * byte by byte. Everything else stays as it is.
 */
export interface Levelling {
	origin: string;
	/** The instant from which on times and ids are of this run and not of the study that was played. */
	since: number;
}

const uuid7 = /\b([0-9a-f]{8})-([0-9a-f]{4})-7[0-9a-f]{3}-[89ab][0-9a-f]{3}-[0-9a-f]{12}\b/g;
const instant = /\b\d{4}-\d{2}-\d{2}[T ]\d{2}:\d{2}:\d{2}(\.\d{1,6})?(Z|[+-]\d{2}(:?\d{2})?)?/g;

export function levelled(text: string, { origin, since }: Levelling): string {
	return text
		.replaceAll(origin, '<origin>')
		.replace(/nonce-[A-Za-z0-9+/=]+/g, 'nonce-<nonce>')
		.replace(/nonce="[^"]*"/g, 'nonce="<nonce>"')
		.replace(uuid7, (id, high: string, low: string) =>
			parseInt(high + low, 16) >= since ? '<id of this run>' : id
		)
		.replace(/new Date\((\d{13})\)/g, (found, at: string) =>
			Number(at) >= since ? 'new Date(<instant of this run>)' : found
		)
		.replace(instant, (found) => {
			const at = Date.parse(
				/Z|[+-]\d{2}(:?\d{2})?$/.test(found)
					? found.replace(' ', 'T').replace(/([+-]\d{2})$/, '$1:00')
					: `${found.replace(' ', 'T')}Z`
			);
			return at >= since ? '<instant of this run>' : found;
		});
}

/** Where two texts part, for the message. */
export function parting(a: string, b: string): string {
	let at = 0;
	while (at < a.length && a[at] === b[at]) at++;
	const around = (text: string) => text.slice(Math.max(0, at - 120), at + 120);
	return `at ${at}:\n  ${around(a)}\n  ${around(b)}`;
}
