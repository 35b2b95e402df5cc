import { labelsOf, numbersOf, rowCount, type Columns } from '../design/columns.js';
import { factorOf } from '../design/factor.js';
import { visitOrder } from '../design/visit-order.js';
import { StatsError } from '../errors.js';
import type { AnalysisPlan } from '../plan.js';

/**
 * Which occasions were due. `every-visit`: each subject was to be seen at each visit, so that no row is a miss.
 * `rows`: only what has a row was due; at an interim look, visits still to come have none.
 */
export type Due = 'every-visit' | 'rows';

export type OccasionState = 'observed' | 'missing' | 'not-due';

/** Each subject at each visit. */
export interface Occasions {
	visits: string[];
	subjects: string[];
	/** Levels in order; empty without a group. */
	groups: string[];
	/** Position of each subject's group; 0 without one, −1 where it is not known. */
	group: Int32Array;
	/** Outcome as handed in, subject by subject, `visits.length` each; 0 where not observed. */
	outcome: Float64Array;
	state: OccasionState[];
}

/** Errors: `repeated-occasion`. */
function refuseTwice(subject: string, visit: string, row: number): never {
	throw new StatsError(
		'repeated-occasion',
		`Subject “${subject}” has two outcomes at the visit “${visit}”, the second in row ${row + 1}.`,
		{ subject, row: row + 1 }
	);
}

/**
 * The outcomes as a table of subjects by visits, from the outcome, subject, time, visit and group of a plan.
 *
 * Rows without a visit are passed over; an occasion with two rows, one of them without an outcome, is observed.
 * Errors: `bad-plan`, `group-changes`, `repeated-occasion`, `missing-subject`, and those of reading columns.
 */
export function occasionsOf(
	columns: Columns,
	plan: Pick<AnalysisPlan, 'outcome' | 'subject' | 'time' | 'visit' | 'group'>,
	due: Due = 'every-visit'
): Occasions {
	if (!plan.visit) {
		throw new StatsError(
			'bad-plan',
			'Patterns of missing outcomes go by visit, so the plan must name a column of visits in “visit”.',
			{ path: 'visit' }
		);
	}
	const rows = rowCount(columns);
	const y = numbersOf(columns, plan.outcome, 'outcome');
	const subject = labelsOf(columns, plan.subject, 'subject');
	if (subject.missing) {
		const row = subject.missing.indexOf(1) + 1;
		throw new StatsError(
			'missing-subject',
			`Row ${row} has no subject: its “${subject.name}” is missing.`,
			{ column: subject.name, row }
		);
	}
	const visit = labelsOf(columns, plan.visit, 'visit');
	const visits = visitOrder(visit, numbersOf(columns, plan.time, 'time'));
	const position = visit.labels.map((label) => visits.indexOf(label));
	const k = visits.length;
	const subjects = subject.labels;
	const outcome = new Float64Array(subjects.length * k);
	const state = new Array<OccasionState>(subjects.length * k).fill(
		due === 'every-visit' ? 'missing' : 'not-due'
	);
	for (let i = 0; i < rows; i++) {
		if (visit.codes[i]! < 0) continue;
		const s = subject.codes[i]!;
		const at = s * k + position[visit.codes[i]!]!;
		if (y.missing?.[i]) {
			if (state[at] === 'not-due') state[at] = 'missing';
			continue;
		}
		if (state[at] === 'observed') refuseTwice(subjects[s]!, visits[at % k]!, i);
		state[at] = 'observed';
		outcome[at] = y.values[i]!;
	}
	return { visits, subjects, outcome, state, ...groupsOf(columns, plan, subject, rows) };
}

/** Errors: `group-changes`, `single-level`. */
function groupsOf(
	columns: Columns,
	plan: Pick<AnalysisPlan, 'group'>,
	subject: ReturnType<typeof labelsOf>,
	rows: number
): { groups: string[]; group: Int32Array } {
	const subjects = subject.labels.length;
	if (!plan.group) return { groups: [], group: new Int32Array(subjects) };
	const group = labelsOf(columns, plan.group, 'group');
	const known = Uint8Array.from(group.codes, (code) => (code >= 0 ? 1 : 0));
	const factor = factorOf(group, known, undefined, 'the group');
	const ofSubject = new Int32Array(subjects).fill(-1);
	for (let i = 0; i < rows; i++) {
		if (group.codes[i]! < 0) continue;
		const level = factor.position[group.codes[i]!]!;
		const s = subject.codes[i]!;
		if (ofSubject[s]! >= 0 && ofSubject[s] !== level) {
			throw new StatsError(
				'group-changes',
				`Subject “${subject.labels[s]}” is in the group “${factor.levels[ofSubject[s]!]}” and, in row ${i + 1}, in “${factor.levels[level]}”; a subject belongs to one group.`,
				{ subject: subject.labels[s]!, row: i + 1 }
			);
		}
		ofSubject[s] = level;
	}
	return { groups: factor.levels, group: ofSubject };
}

/** Position of the last observed visit of a subject; −1 when none is. */
export function lastObserved({ visits, state }: Occasions, subject: number): number {
	const k = visits.length;
	for (let v = k - 1; v >= 0; v--) if (state[subject * k + v] === 'observed') return v;
	return -1;
}

/** Position of the last due visit of a subject; −1 when none is. */
export function lastDue({ visits, state }: Occasions, subject: number): number {
	const k = visits.length;
	for (let v = k - 1; v >= 0; v--) if (state[subject * k + v] !== 'not-due') return v;
	return -1;
}
