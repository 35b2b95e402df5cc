import type { Characteristic, StudyDefinition } from '../study/definition';
import type { UnitCode } from '../../units/units';

/**
 * What a data cut holds: the study as it stood at the cut-off, subject by subject. No allocation and no kit number is
 * in it. Everything is plain JSON in a fixed order, so that one state of the data has one fingerprint.
 */
export interface CutMeasure {
	key: string;
	name: string;
	kind: 'number' | 'repeated' | 'derived' | 'choice' | 'date' | 'text';
	unit: UnitCode | null;
	decimals: number;
}

export interface CutValue {
	value: number | null;
	text: string | null;
	readings: number[] | null;
	unit: string;
	notDone: string | null;
	takenAt: string | null;
	enteredAt: string;
	source: 'form' | 'import' | 'derived';
}

export interface CutVisit {
	/** The planned visit's key; null for one that was not planned. */
	key: string | null;
	name: string;
	position: number;
	status: string;
	happenedOn: string | null;
	/** As the imported file gave it, in `studyTimeUnit`. */
	studyTime: number | null;
	values: Record<string, CutValue>;
}

export interface CutSubject {
	id: string;
	number: string;
	importedAs: string | null;
	site: string;
	enrolledOn: string;
	randomisedOn: string | null;
	stratum: Record<string, string | number | null>;
	characteristics: Record<string, string | number | null>;
	exits: { kind: string; on: string }[];
	/** Came by the screening log; otherwise taken over from a file. */
	screened?: boolean;
	visits: CutVisit[];
}

/** Entries of the screening log that ended alike, counted: no person stands in it. */
export interface CutScreening {
	outcome: 'in progress' | 'entered' | 'not entered';
	reason: string | null;
	n: number;
}

/** The first format holds no screening log, and nothing that only the flow of participants needs. */
export type CutFormat = 'heddle.cut/1' | 'heddle.cut/2';

export interface CutContent {
	format: CutFormat;
	study: string;
	cutOffAt: string;
	protocolVersion: number;
	/** What days are counted from. */
	anchor: 'enrolment' | 'randomisation';
	timeUnit: StudyDefinition['timeUnit'];
	baselineVisit: string;
	primaryMeasure?: string;
	randomises?: boolean;
	enrolmentPlan?: StudyDefinition['enrolmentPlan'] | null;
	measures: CutMeasure[];
	characteristics: Characteristic[];
	sites: { code: string; name: string }[];
	subjects: CutSubject[];
	screening?: CutScreening[];
}

/** Values that count as measurements: what was measured, not what was left out. */
export const isMeasured = (value: CutValue): boolean => value.value !== null || value.text !== null;

export function measurementsIn(content: Pick<CutContent, 'subjects'>): number {
	let total = 0;
	for (const subject of content.subjects)
		for (const visit of subject.visits)
			for (const value of Object.values(visit.values)) if (isMeasured(value)) total++;
	return total;
}
