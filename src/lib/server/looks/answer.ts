import { canonical, type Json } from '$lib/domain/cut/canonical';
import type { CutContent } from '$lib/domain/cut/content';
import { fingerprintNow } from '$lib/domain/cut/fingerprint.server';
import type { LookSpec } from '$lib/domain/look/look.input';
import type { LookResult } from '$lib/domain/look/result';
import { rowsFromCut, Unanswerable, type LookRows } from '$lib/domain/look/rows';
import { wordsOf } from '$lib/domain/look/words';
import { Refusal } from '$lib/refusal';
import { ENGINE_VERSION } from '$lib/stats';
import type { Supervision } from '../jobs/run';
import { fitInThread } from './fit';

function rowsOrRefusal(
	content: CutContent,
	spec: LookSpec,
	arms: ReadonlyMap<string, string> | null
): LookRows {
	try {
		return rowsFromCut(content, spec, arms);
	} catch (thrown) {
		if (thrown instanceof Unanswerable)
			throw new Refusal('NOT_ANALYSABLE', { why: thrown.message });
		throw thrown;
	}
}

/** SHA-256 of everything the answer depends on: the rows, the model, the engine. */
export const inputHashOf = ({ rows, spec, options }: LookRows): string =>
	fingerprintNow(canonical({ engine: ENGINE_VERSION, rows, spec, options } as unknown as Json));

/** One look answered: the same for pooled and by-arm ones, which differ in whether letters are handed in. */
export async function answerLook(
	content: CutContent,
	spec: LookSpec,
	arms: ReadonlyMap<string, string> | null,
	supervision: Supervision
): Promise<{ result: LookResult; inputHash: string }> {
	const input = rowsOrRefusal(content, spec, arms);
	const inputHash = inputHashOf(input);
	const growth = await fitInThread(
		{ rows: input.rows, spec: input.spec, options: input.options },
		supervision
	);
	// Said with the engine's own notes about what was left out, on screen and on paper.
	growth.notes.push(
		...input.leftOut.map((sentence) => ({ code: 'subjects-dropped' as const, sentence }))
	);
	return { result: { growth, words: wordsOf(spec, content), leftOut: input.leftOut }, inputHash };
}
