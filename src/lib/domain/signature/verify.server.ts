import { sql } from 'kysely';
import { instantText } from '$lib/time/zones';
import type { Actor } from '$lib/server/actor';
import { readOwn, type Reader } from '$lib/server/change';
import { judge, keptSignatures, type Judged } from './standing.server';

export interface Verified {
	standing: number;
	broken: number;
	/** Of the broken ones, those whose record was signed again and stands so. */
	renewed: number;
	damaged: number;
	/** Of those the trail saw being made, how many are not there any more. */
	missing: number;
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
		const gone = await missingSignatures(reader);
		const renewed = (judged: Judged) =>
			judged.standing === 'broken' && standing.has(nameOf(judged));
		const again = told.filter(renewed).length;
		const all = counts.stands + counts.broken + counts.damaged;
		return {
			standing: counts.stands,
			broken: counts.broken,
			renewed: again,
			damaged: counts.damaged,
			missing: gone.length,
			lines: [
				...told.map((judged) => lineOf(judged, renewed(judged))),
				...gone.map((id) => `signature ${id}: missing, the trail saw it being made`),
				all + gone.length === 0
					? 'No signatures yet.'
					: `${all} signatures: ${counts.stands} standing, ${counts.broken} broken (${again} of them signed again), ${counts.damaged} damaged, ${gone.length} missing.`
			]
		};
	});

/** Ids of signatures of which the trail holds the making and the table no row. */
async function missingSignatures(reader: Reader): Promise<string[]> {
	const rows = await reader
		.selectFrom('audit.event as e')
		.select('e.record_id')
		.where('e.record', '=', 'signature')
		.where('e.action', '=', 'create')
		.where((where) =>
			where.not(
				where.exists(
					where
						.selectFrom('signature as s')
						.select('s.id')
						.whereRef(sql`s.id::text`, '=', 'e.record_id')
				)
			)
		)
		.orderBy('e.id')
		.execute();
	return rows.flatMap((row) => row.record_id ?? []);
}

const nameOf = ({ kept }: Judged) => `${kept.record} ${kept.record_id} ${kept.meaning}`;

function lineOf({ kept, standing, broken }: Judged, renewed: boolean): string {
	const what = `signature ${kept.id} on ${kept.record} ${kept.record_id}, ${instantText(kept.at, kept.zone)}`;
	if (standing === 'damaged') return `${what}: damaged, the kept row is not what was signed`;
	const since = broken
		? `changed on ${instantText(broken.at, kept.zone)}`
		: 'changed, and the trail does not say when';
	return `${what}: broken, ${since}${renewed ? '; signed again since' : ''}`;
}
