/**
 * The flow of participants: who was considered, entered, allocated, followed, and where each one is now. Counts follow
 * CONSORT 2010 item 13a–b (2025: 22a–b): assessed, excluded with reasons, randomised, lost and discontinued with reasons.
 * Everybody is counted in exactly one place at each step, so that the steps add up.
 */
export interface FlowScreening {
	outcome: 'in progress' | 'entered' | 'not entered';
	reason: string | null;
}

export interface FlowSubject {
	/** Came by the screening log; otherwise taken over from elsewhere. */
	screened: boolean;
	randomised: boolean;
	/** Only where the arms are open; null pools everybody. */
	arm: string | null;
	/** Ways out that stand. */
	exits: readonly string[];
	/** Has a value of the primary measure. */
	measured: boolean;
}

export interface Counted {
	label: string;
	n: number;
}

export interface FlowColumn {
	/** The arm's name; null pools everybody. */
	arm: string | null;
	n: number;
	/** Stopped the treatment; still followed unless counted under a way out as well. */
	discontinued: number;
	ended: Counted[];
	completed: number;
	inFollowUp: number;
	/** Of all in the column, with a value of the primary measure. */
	measured: number;
}

export interface Flow {
	randomises: boolean;
	assessed: number;
	inScreening: number;
	excluded: Counted[];
	takenOver: number;
	enrolled: number;
	/** Enrolled and not randomised: left before, and still waiting. Empty where nobody is randomised. */
	notRandomised: Counted[];
	columns: FlowColumn[];
}

/** Of several ways out the first of these is where somebody is counted. */
const endings = ['died', 'consent withdrawn', 'lost to follow-up', 'stopped visits'] as const;

type State = (typeof endings)[number] | 'completed' | 'in follow-up';

export function stateOf(exits: readonly string[]): State {
	for (const ending of endings) if (exits.includes(ending)) return ending;
	return exits.includes('completed') ? 'completed' : 'in follow-up';
}

const mostReasons = 8;

/** Reasons as they were written, the same but for capitals and a full stop counted together; the rare ones in one line. */
export function reasonsOf(reasons: readonly (string | null)[]): Counted[] {
	const groups = new Map<string, Counted>();
	for (const reason of reasons) {
		const label = (reason ?? 'no reason given').trim().replace(/\s+/g, ' ').replace(/\.$/, '');
		const key = label.toLowerCase();
		const group = groups.get(key);
		if (group) group.n += 1;
		else groups.set(key, { label, n: 1 });
	}
	const all = [...groups.values()].sort((a, b) => b.n - a.n || (a.label < b.label ? -1 : 1));
	if (all.length <= mostReasons) return all;
	const rare = all.slice(mostReasons - 1);
	return [
		...all.slice(0, mostReasons - 1),
		{ label: `other reasons (${rare.length})`, n: total(rare) }
	];
}

export const total = (counted: readonly Counted[]): number =>
	counted.reduce((sum, each) => sum + each.n, 0);

function columnOf(arm: string | null, subjects: readonly FlowSubject[]): FlowColumn {
	const states = subjects.map((subject) => stateOf(subject.exits));
	const count = (state: State) => states.filter((each) => each === state).length;
	return {
		arm,
		n: subjects.length,
		discontinued: subjects.filter((each) => each.exits.includes('intervention discontinued'))
			.length,
		ended: endings.map((label) => ({ label, n: count(label) })),
		completed: count('completed'),
		inFollowUp: count('in follow-up'),
		measured: subjects.filter((each) => each.measured).length
	};
}

export function flowOf(
	screenings: readonly FlowScreening[],
	subjects: readonly FlowSubject[],
	study: { randomises: boolean; arms: readonly string[] | null }
): Flow {
	const inside = study.randomises ? subjects.filter((each) => each.randomised) : [...subjects];
	const outside = study.randomises ? subjects.filter((each) => !each.randomised) : [];
	const waiting = outside.filter((each) => stateOf(each.exits) === 'in follow-up').length;
	const columns =
		study.arms === null
			? [columnOf(null, inside)]
			: study.arms.map((arm) =>
					columnOf(
						arm,
						inside.filter((each) => each.arm === arm)
					)
				);
	return {
		randomises: study.randomises,
		assessed: screenings.length,
		inScreening: screenings.filter((each) => each.outcome === 'in progress').length,
		excluded: reasonsOf(
			screenings.filter((each) => each.outcome === 'not entered').map((each) => each.reason)
		),
		takenOver: subjects.filter((each) => !each.screened).length,
		enrolled: subjects.length,
		notRandomised: study.randomises
			? [
					{ label: 'left before', n: outside.length - waiting },
					{ label: 'not randomised yet', n: waiting }
				]
			: [],
		columns
	};
}

/** Which sums do not hold, in words; empty when every one does. */
export function flowBreaks(flow: Flow): string[] {
	const breaks: string[] = [];
	const hold = (left: number, right: number, what: string) => {
		if (left !== right) breaks.push(`${what}: ${left} against ${right}`);
	};
	hold(
		flow.assessed + flow.takenOver,
		flow.inScreening + total(flow.excluded) + flow.enrolled,
		'assessed and taken over = in screening + not entered + enrolled'
	);
	const inside = flow.columns.reduce((sum, column) => sum + column.n, 0);
	hold(flow.enrolled, inside + total(flow.notRandomised), 'enrolled = randomised + not randomised');
	for (const column of flow.columns)
		hold(
			column.n,
			total(column.ended) + column.completed + column.inFollowUp,
			`${column.arm ?? 'everybody'} = ended + completed + in follow-up`
		);
	return breaks;
}
