import { Refusal } from '$lib/refusal';

const usual = 256 * 1024;

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

/** How much more than the limit is still read, and thrown away, so that the refusal reaches whoever is sending. */
const drained = 8 * 1024 * 1024;

async function readText(request: Request, limit: number): Promise<string> {
	const reader = request.body?.getReader();
	if (!reader) return '';
	const tooLarge = new Refusal('TOO_LARGE', { limit: `${Math.floor(limit / 1024)} KiB` });
	const parts: Uint8Array[] = [];
	let size = 0;
	for (;;) {
		const { done, value } = await reader.read().catch((error: unknown) => {
			// The server's own limit on bodies, which is larger than ours.
			if ((error as { status?: number } | null)?.status === 413) throw tooLarge;
			throw error;
		});
		if (done) break;
		size += value.length;
		if (size <= limit) parts.push(value);
		else if (size > limit + drained) {
			await reader.cancel();
			throw tooLarge;
		}
	}
	if (size > limit) throw tooLarge;
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
