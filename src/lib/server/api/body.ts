import { Refusal } from '$lib/refusal';

const usual = 256 * 1024;
const patience = 1024 * 1024;

/** The body as JSON. NUL characters are refused here once for all: PostgreSQL holds no text with them. */
export async function readJson(request: Request, limit = usual): Promise<unknown> {
	const type = request.headers.get('content-type') ?? '';
	if (!/^application\/(merge-patch\+)?json\b/i.test(type))
		throw new Refusal('WRONG_TYPE', { wanted: 'application/json' });
	const text = await readText(request, limit);
	let value: unknown;
	try {
		value = JSON.parse(text);
	} catch {
		throw new Refusal('NOT_JSON');
	}
	refuseNul(value, []);
	return value;
}

async function readText(request: Request, limit: number): Promise<string> {
	const reader = request.body?.getReader();
	if (!reader) return '';
	const parts: Uint8Array[] = [];
	let size = 0;
	for (;;) {
		const { done, value } = await reader.read();
		if (done) break;
		size += value.length;
		// Read on for a while without keeping it: whoever is still sending could not hear the refusal.
		if (size > limit + patience) await reader.cancel();
		if (size <= limit) parts.push(value);
		else if (size > limit + patience) break;
	}
	if (size > limit) throw new Refusal('TOO_LARGE', { limit: `${Math.floor(limit / 1024)} KiB` });
	return Buffer.concat(parts).toString('utf8');
}

function refuseNul(value: unknown, path: string[]): void {
	if (typeof value === 'string' && value.includes('\u0000'))
		throw new Refusal(
			'INVALID',
			{},
			{
				[path.join('.') || 'body']: 'This text holds a character that cannot be kept (NUL).'
			}
		);
	if (value && typeof value === 'object')
		for (const [key, inner] of Object.entries(value)) {
			if (key.includes('\u0000'))
				throw new Refusal('INVALID', {}, { body: 'A field’s name holds NUL.' });
			refuseNul(inner, [...path, key]);
		}
}
