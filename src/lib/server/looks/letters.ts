import type { Letters } from '$lib/domain/flow/cut-flow';
import type { Reader } from '../change';

/** Each allocated subject's letter at the cut-off, as the look worker may read them; letters alone leave this function. */
export async function lettersOf(reader: Reader, studyId: string, cutId: string): Promise<Letters> {
	const frozen = await reader
		.selectFrom('closed.cut_allocation')
		.select('content')
		.where('cut_id', '=', cutId)
		.where('study_id', '=', studyId)
		.executeTakeFirst();
	const letters = new Map(
		(
			await reader
				.selectFrom('closed.arm_letter')
				.select(['arm_key', 'letter'])
				.where('study_id', '=', studyId)
				.execute()
		).map(({ arm_key, letter }) => [arm_key, letter])
	);
	const held = (frozen?.content ?? {}) as unknown as Record<string, string>;
	return {
		all: [...letters.values()].sort(),
		of: new Map(
			Object.entries(held).flatMap(([subjectId, arm]) => {
				const letter = letters.get(arm);
				return letter === undefined ? [] : [[subjectId, letter] as const];
			})
		)
	};
}
