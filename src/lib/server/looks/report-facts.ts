import { contentOf } from '$lib/domain/cut/cut.reads.server';
import { cutFlow } from '$lib/domain/flow/cut-flow';
import type { LookRefused, LookResult } from '$lib/domain/look/result';
import { isRefused } from '$lib/domain/look/result';
import { Refusal } from '$lib/refusal';
import type { Reader } from '../change';
import { lettersOf } from './letters';
import type { ReportFacts } from './report-input';

export interface HeldReport {
	id: string;
	studyId: string;
	lookId: string;
	kind: 'open' | 'closed';
	status: 'waiting' | 'made' | 'failed';
	madeAt: Date | null;
	facts: Omit<ReportFacts, 'made' | 'released'>;
	madeBy: string;
}

/** A by-arm result is read from the closed area, which only the look worker's role can. */
async function resultOf(
	reader: Reader,
	look: { id: string; kind: string; result: unknown; input_hash: string | null }
): Promise<{ result: LookResult | LookRefused | null; inputHash: string | null }> {
	if (look.kind === 'pooled')
		return { result: look.result as LookResult | null, inputHash: look.input_hash };
	const held = await reader
		.selectFrom('closed.look_result')
		.select(['result', 'input_hash'])
		.where('look_id', '=', look.id)
		.executeTakeFirst();
	return {
		result: (held?.result ?? null) as unknown as LookResult | LookRefused | null,
		inputHash: held?.input_hash ?? null
	};
}

/** A report with all it prints, for the workers. */
export async function heldReport(reader: Reader, reportId: string): Promise<HeldReport> {
	const row = await reader
		.selectFrom('report')
		.innerJoin('look', 'look.id', 'report.look_id')
		.innerJoin('cut', 'cut.id', 'look.cut_id')
		.innerJoin('study', 'study.id', 'report.study_id')
		.innerJoin('person as maker', 'maker.id', 'report.made_by')
		.innerJoin('person as freezer', 'freezer.id', 'cut.made_by')
		.select([
			'report.id',
			'report.study_id',
			'report.kind as report_kind',
			'report.status',
			'report.made_at',
			'maker.name as made_by',
			'look.id as look_id',
			'look.kind',
			'look.number',
			'look.planned',
			'look.result',
			'look.input_hash',
			'cut.id as cut_id',
			'cut.number as cut_number',
			'cut.label',
			'cut.cut_off_at',
			'cut.extracted_at',
			'cut.subjects',
			'cut.measurements',
			'cut.fingerprint',
			'freezer.name as frozen_by',
			'study.name',
			'study.code',
			'study.training'
		])
		.where('report.id', '=', reportId)
		.executeTakeFirst();
	if (!row) throw new Refusal('NOT_FOUND');
	const { result, inputHash } = await resultOf(reader, {
		id: row.look_id,
		kind: row.kind,
		result: row.result,
		input_hash: row.input_hash
	});
	if (!result || isRefused(result) || !inputHash) throw new Refusal('LOOK_NOT_READY');
	const { content } = await contentOf(reader, row.study_id, row.cut_id);
	const letters = row.kind === 'pooled' ? null : await lettersOf(reader, row.study_id, row.cut_id);
	return {
		id: row.id,
		studyId: row.study_id,
		lookId: row.look_id,
		kind: row.report_kind,
		status: row.status,
		madeAt: row.made_at,
		madeBy: row.made_by,
		facts: {
			study: { name: row.name, code: row.code, training: row.training },
			cut: {
				id: row.cut_id,
				number: row.cut_number,
				label: row.label,
				cutOffAt: row.cut_off_at.toISOString(),
				extractedAt: row.extracted_at.toISOString(),
				madeBy: row.frozen_by,
				subjects: row.subjects,
				measurements: row.measurements,
				fingerprint: row.fingerprint
			},
			look: { number: row.number, planned: row.planned },
			flow: cutFlow(content, letters),
			result,
			inputHash
		}
	};
}
