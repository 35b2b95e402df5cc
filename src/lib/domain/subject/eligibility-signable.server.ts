import { sql } from 'kysely';
import type { Reader } from '$lib/server/change';
import { canonical, type Json } from '../cut/canonical';
import type { SignableKind } from '../signature/signable';
import type { StudyDefinition } from '../study/definition';
import { getVersionByNumber, publishedNumbers } from '../study/study.reads.server';
import { answeredAtOf, answeredVersionOf, answersOf, standing } from './eligibility';
import { eligibilitySheet } from './eligibility-sheet';

/** The part of a screening that an eligibility signature is about, as one text. */
const signedPart = (eligibility: unknown): string =>
	canonical({
		answers: answersOf(eligibility) as Json,
		answeredAt: answeredAtOf(eligibility),
		protocolVersion: answeredVersionOf(eligibility)
	});

function obstacleOf(
	row: { outcome: string; eligibility: unknown },
	definition: Pick<StudyDefinition, 'eligibility'>,
	newest: number
): string | null {
	if (row.outcome === 'not entered') return 'This screening is closed: the person was not entered.';
	const { unanswered, unmet } = standing(definition, answersOf(row.eligibility));
	if (unanswered.length > 0) return 'Not every criterion is answered yet.';
	if (unmet.length > 0) return 'Not every criterion is met.';
	if (row.outcome === 'in progress' && answeredVersionOf(row.eligibility) !== newest)
		return `Protocol version ${newest} is in force: its criteria are to be answered first.`;
	return null;
}

async function rowsOf(reader: Reader, ids: readonly string[], hold: boolean) {
	if (ids.length === 0) return [];
	return reader
		.selectFrom('screening as c')
		.innerJoin('site as t', 't.id', 'c.site_id')
		.innerJoin('study as s', 's.id', 'c.study_id')
		.select([
			'c.id',
			'c.study_id',
			'c.site_id',
			'c.number',
			'c.screened_on',
			'c.outcome',
			'c.eligibility',
			's.code as study',
			't.code as site',
			't.name as site_name'
		])
		.where('c.id', 'in', ids)
		.orderBy('c.id')
		.$if(hold, (q) => q.forUpdate('c'))
		.execute();
}

/** The eligibility checklist of a screening, signed by the investigator. The record's id is the screening's. */
export const eligibilityKind: SignableKind = {
	kind: 'eligibility',
	capability: 'signature.eligibility',
	async find(reader, recordIds, hold = false) {
		const rows = await rowsOf(reader, recordIds, hold);
		const newest = await publishedNumbers(reader, [...new Set(rows.map((row) => row.study_id))]);
		const definitions = new Map<string, StudyDefinition>();
		const found = [];
		for (const row of rows) {
			const number = answeredVersionOf(row.eligibility) ?? newest.get(row.study_id) ?? 0;
			const key = `${row.study_id} ${number}`;
			const definition =
				definitions.get(key) ?? (await getVersionByNumber(reader, row.study_id, number));
			definitions.set(key, definition);
			found.push({
				recordId: row.id,
				studyId: row.study_id,
				siteId: row.site_id,
				place: row.site_name,
				sheet: eligibilitySheet({
					id: row.id,
					study: row.study,
					site: row.site,
					number: row.number,
					screenedOn: row.screened_on,
					protocolVersion: number,
					answeredAt: answeredAtOf(row.eligibility),
					criteria: definition.eligibility,
					answers: answersOf(row.eligibility)
				}),
				obstacle: obstacleOf(row, definition, newest.get(row.study_id) ?? 0)
			});
		}
		return found;
	},
	async waiting(reader, studyId, sites, limit) {
		if (sites?.length === 0) return [];
		const rows = await reader
			.selectFrom('screening')
			.select('id')
			.where('study_id', '=', studyId)
			.where('outcome', '=', 'in progress')
			.where(sql<boolean>`jsonb_exists(eligibility, 'answers')`)
			.$if(sites !== null, (q) => q.where('site_id', 'in', sites ?? []))
			.orderBy('id')
			.limit(limit)
			.execute();
		return rows.map((row) => row.id);
	},
	async changesAfter(reader, recordId, after) {
		const rows = await reader
			.selectFrom('audit.event as e')
			.innerJoin('person as p', 'p.id', 'e.actor')
			.select(['e.at', 'p.name', 'e.before', 'e.after'])
			.where('e.record', '=', 'screening')
			.where('e.record_id', '=', recordId)
			.where('e.id', '>', after)
			.where('e.action', '=', 'change')
			.where(sql<boolean>`jsonb_exists(e.after, 'eligibility')`)
			.orderBy('e.id')
			.execute();
		const part = (of: unknown) => signedPart((of as { eligibility?: unknown } | null)?.eligibility);
		return rows.map((row) => ({
			at: row.at,
			by: row.name,
			before: part(row.before),
			after: part(row.after)
		}));
	}
};
