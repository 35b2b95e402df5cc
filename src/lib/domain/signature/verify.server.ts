import { instantText } from '$lib/time/zones';
import type { Actor } from '$lib/server/actor';
import { readOwn } from '$lib/server/change';
import { judge, keptSignatures, type Judged } from './standing.server';

export interface Verified {
	standing: number;
	broken: number;
	/** Of the broken ones, those whose record was signed again and stands so. */
	renewed: number;
	damaged: number;
	/** What to print: one line for each signature that does not stand, then the counts. */
	lines: string[];
}

const batch = 500;

/**
 * Holds every signature against its kept content and against its record as it stands, in all studies; for Heddle itself,
 * which sees them all.
 */
export const verifySignatures = (actor: Actor): Promise<Verified> =>
	readOwn(actor, async (reader) => {
		const told: Judged[] = [];
		const counts = { stands: 0, broken: 0, damaged: 0 };
		const standing = new Set<string>();
		let after = '00000000-0000-0000-0000-000000000000';
		for (;;) {
			const kept = await keptSignatures(reader)
				.where('s.id', '>', after)
				.orderBy('s.id')
				.limit(batch)
				.execute();
			for (const judged of await judge(reader, kept)) {
				counts[judged.standing]++;
				if (judged.standing === 'stands') standing.add(nameOf(judged));
				else told.push(judged);
			}
			after = kept.at(-1)?.id ?? after;
			if (kept.length < batch) break;
		}
		const renewed = (judged: Judged) =>
			judged.standing === 'broken' && standing.has(nameOf(judged));
		const again = told.filter(renewed).length;
		const all = counts.stands + counts.broken + counts.damaged;
		return {
			standing: counts.stands,
			broken: counts.broken,
			renewed: again,
			damaged: counts.damaged,
			lines: [
				...told.map((judged) => lineOf(judged, renewed(judged))),
				all === 0
					? 'No signatures yet.'
					: `${all} signatures: ${counts.stands} standing, ${counts.broken} broken (${again} of them signed again), ${counts.damaged} damaged.`
			]
		};
	});

const nameOf = ({ kept }: Judged) => `${kept.record} ${kept.record_id} ${kept.meaning}`;

function lineOf({ kept, standing, broken }: Judged, renewed: boolean): string {
	const what = `signature ${kept.id} on ${kept.record} ${kept.record_id}, ${instantText(kept.at, kept.zone)}`;
	if (standing === 'damaged') return `${what}: damaged, the kept row is not what was signed`;
	const since = broken
		? `changed on ${instantText(broken.at, kept.zone)}`
		: 'changed, and the trail does not say when';
	return `${what}: broken, ${since}${renewed ? '; signed again since' : ''}`;
}
