import { expect } from 'vitest';
import { Refusal, type RefusalCode } from '../../src/lib/refusal';

/** That the work is refused with this code; the refusal, for what it says. */
export async function refusal(work: Promise<unknown>, code: RefusalCode): Promise<Refusal> {
	const thrown = await work.then(
		() => undefined,
		(error: unknown) => error
	);
	if (!(thrown instanceof Refusal)) throw thrown ?? new Error(`Not refused; wanted ${code}`);
	expect(thrown.code).toBe(code);
	return thrown;
}
