import type { Reader } from '$lib/server/change';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import { instantText } from '$lib/time/zones';
import { exitMeanings, type ExitKind } from './exit';
import type { RecordItem } from './record.reads.server';
import type { SiteNow } from './site.reads.server';

/** Ways out, moves between sites and refusals on the Thread page. */

const dayWords = (date: string) => shortDateText(plainDateOf(date));
const capital = (text: string) => text.charAt(0).toUpperCase() + text.slice(1);

export async function exitItems(
	reader: Reader,
	studyId: string,
	subjectId: string,
	site: SiteNow
): Promise<RecordItem[]> {
	const exits = await reader
		.selectFrom('study_exit as x')
		.leftJoin('person as p', 'p.id', 'x.taken_back_by')
		.select([
			'x.id',
			'x.kind',
			'x.happened_on',
			'x.reason',
			'x.taken_back_at',
			'x.taken_back_reason',
			'p.name'
		])
		.where('x.study_id', '=', studyId)
		.where('x.subject_id', '=', subjectId)
		.execute();
	return exits.map((each) => ({
		id: each.id,
		kind: 'exit',
		when: dayWords(each.happened_on),
		key: `${each.happened_on} ~4`,
		title: `${capital(each.kind)}${each.taken_back_at ? ' (taken back)' : ''}`,
		lines: [
			exitMeanings[each.kind as ExitKind],
			each.reason ? `Said: ${each.reason}` : '',
			each.taken_back_at
				? `Taken back ${instantText(each.taken_back_at, site.zone)} by ${each.name ?? ''}: ${each.taken_back_reason}`
				: ''
		].filter(Boolean)
	}));
}

export async function movedItems(
	reader: Reader,
	studyId: string,
	subjectId: string
): Promise<RecordItem[]> {
	const moves = await reader
		.selectFrom('transfer as m')
		.innerJoin('site as f', 'f.id', 'm.from_site_id')
		.innerJoin('site as t', 't.id', 'm.site_id')
		.innerJoin('person as p', 'p.id', 'm.made_by')
		.select(['m.id', 'm.transferred_on', 'm.reason', 'f.name as from', 't.name as to', 'p.name'])
		.where('m.study_id', '=', studyId)
		.where('m.subject_id', '=', subjectId)
		.execute();
	return moves.map((each) => ({
		id: each.id,
		kind: 'transfer',
		when: dayWords(each.transferred_on),
		key: `${each.transferred_on} ~4`,
		title: `Moved from ${each.from} to ${each.to}`,
		lines: [`Reason: ${each.reason}`, `By ${each.name}.`]
	}));
}

export async function refusedItems(
	reader: Reader,
	studyId: string,
	subjectId: string
): Promise<RecordItem[]> {
	const refusals = await reader
		.selectFrom('reconsent_refusal as r')
		.leftJoin('protocol_version as v', 'v.id', 'r.protocol_version_id')
		.innerJoin('person as p', 'p.id', 'r.recorded_by')
		.select(['r.id', 'r.refused_on', 'r.reason', 'v.number', 'p.name'])
		.where('r.study_id', '=', studyId)
		.where('r.subject_id', '=', subjectId)
		.execute();
	return refusals.map((each) => ({
		id: each.id,
		kind: 'refusal',
		when: dayWords(each.refused_on),
		key: `${each.refused_on} ~4`,
		title: each.number
			? `Asked again, refused: protocol version ${each.number}`
			: 'Asked on coming of age, refused',
		lines: [
			'The version consented to before stays.',
			each.reason ? `Said: ${each.reason}` : '',
			`Recorded by ${each.name}.`
		].filter(Boolean)
	}));
}
