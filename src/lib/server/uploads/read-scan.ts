import { scanLimits, scanLimitWords } from '$lib/domain/upload/scan';
import { Refusal } from '$lib/refusal';

const tooLarge = () =>
	new Refusal('TOO_LARGE', { limit: scanLimitWords }, { file: `At most ${scanLimitWords}.` });

/** Refuses by what the request says of its own length, before any of it is read; a form around the file takes little more. */
export function refuseByLength(headers: Headers, around = 0): void {
	if (Number(headers.get('content-length') ?? 0) > scanLimits.bytes + around) throw tooLarge();
}

/** The file as the request's body, given up as soon as it is larger than a scan may be. */
export async function readScan(request: Request): Promise<Buffer> {
	refuseByLength(request.headers);
	const reader = request.body?.getReader();
	if (!reader) return Buffer.alloc(0);
	const parts: Uint8Array[] = [];
	let size = 0;
	for (;;) {
		const { done, value } = await reader.read();
		if (done) break;
		size += value.length;
		if (size > scanLimits.bytes) {
			await reader.cancel().catch(() => {});
			throw tooLarge();
		}
		parts.push(value);
	}
	return Buffer.concat(parts);
}

/** How much of a body that is refused is still read, and thrown away, so that the refusal reaches whoever is sending. */
const drained = scanLimits.bytes + 4 * 1024 * 1024;

/** Reads on what nobody wants any more, within bounds. */
export async function letGo(request: Request): Promise<void> {
	if (request.bodyUsed || !request.body) return;
	const reader = request.body.getReader();
	try {
		for (let size = 0; size <= drained;) {
			const { done, value } = await reader.read();
			if (done) return;
			size += value.length;
		}
		await reader.cancel();
	} catch {
		// Whoever sent it has gone.
	}
}
