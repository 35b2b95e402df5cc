import { Refusal } from '$lib/refusal';
import { importLimits } from '$lib/domain/import/table';

/** A whole file from a request's body; given up as soon as it is larger than a file may be. */
export async function readBytes(request: Request): Promise<Buffer> {
	const reader = request.body?.getReader();
	if (!reader) return Buffer.alloc(0);
	const parts: Uint8Array[] = [];
	let size = 0;
	for (;;) {
		const { done, value } = await reader.read();
		if (done) break;
		size += value.length;
		if (size > importLimits.bytes) {
			await reader.cancel();
			throw new Refusal('TOO_LARGE', { limit: `${importLimits.bytes / 1024 / 1024} MB` });
		}
		parts.push(value);
	}
	return Buffer.concat(parts);
}

const named = /filename\*?=(?:UTF-8'')?"?([^";]+)"?/i;

/** The name a file was sent under, where the sender said it. */
export function fileNameIn(headers: Headers): string {
	const given = named.exec(headers.get('content-disposition') ?? '')?.[1];
	if (!given) return 'file.csv';
	try {
		return (
			decodeURIComponent(given)
				.replace(/\p{Cc}/gu, '')
				.slice(0, 200) || 'file.csv'
		);
	} catch {
		return 'file.csv';
	}
}
