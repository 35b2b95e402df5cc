import type { CutHead } from '$lib/domain/cut/cut.reads.server';
import type { ClosedLook, OpenLook } from '$lib/domain/look/look.reads.server';
import type { ReconsentTask } from '$lib/domain/consent/reconsent.reads.server';
import type { Role } from '$lib/domain/person/roles';
import type { StudyState } from '$lib/domain/visit/today.reads.server';
import { instantText } from '$lib/time/zones';

export interface Pointer {
	href: string;
	label: string;
	text: string;
}

/** What a statistician has to go on: cuts and looks, the newest first. */
export interface Analyses {
	cuts: CutHead[];
	looks: (OpenLook | ClosedLook)[];
}

/** Where each role's work is, when it is not on this page itself. */
export function pointersFor(
	roles: ReadonlySet<Role>,
	studyId: string,
	state: StudyState | null,
	screenings: number | null,
	analyses: Analyses | null,
	asked: readonly Pick<ReconsentTask, 'overdue' | 'refused'>[] | null = null
): Pointer[] {
	const to = (path: string, label: string, text: string): Pointer => ({
		href: `/studies/${studyId}${path}`,
		label,
		text
	});
	const found: Pointer[] = [];
	if (state) found.push(...nextSteps(state, to));
	if (screenings !== null)
		found.push(
			to(
				'/screening',
				'Screening log',
				screenings === 0
					? 'Nobody is in screening. Add the next person there.'
					: `${screenings} in progress.`
			)
		);
	const open = asked?.filter((task) => task.refused === null) ?? [];
	if (open.length > 0) {
		const overdue = open.filter((task) => task.overdue).length;
		found.push(
			to(
				'/consent',
				'Re-consent',
				`${open.length === 1 ? 'One person has' : `${open.length} people have`} to be asked again for consent${overdue > 0 ? `, ${overdue} of them overdue` : ''}.`
			)
		);
	}
	if (roles.has('monitor') || roles.has('auditor'))
		found.push(
			to('/audit', 'Audit trail', 'Who did what, when and why; to filter and to follow one record.')
		);
	if (roles.has('auditor'))
		found.push(to('/subjects', 'Subjects', 'The record as the sites see it, to read.'));
	if (analyses) found.push(to('/cuts', 'Data cuts', cutsSoFar(analyses.cuts)));
	if (analyses && roles.has('statistician'))
		found.push(
			to(
				'/looks',
				'Looks',
				`${looksSoFar(analyses.looks)} Choose a question and fit it to a cut, pooled over everybody.`
			)
		);
	if (analyses && roles.has('independent_statistician'))
		found.push(
			to(
				'/looks',
				'Looks',
				`${looksSoFar(analyses.looks)} The planned looks go by arm; each further one is counted and printed.`
			),
			to('/board', 'Board room', 'Reports that are made and released for the board.')
		);
	if (roles.has('board_member'))
		found.push(to('/board', 'Board room', 'The reports released to you, and the recommendation.'));
	return found;
}

function cutsSoFar([latest, ...others]: CutHead[]): string {
	if (!latest) return 'None yet. A look is made from a frozen cut.';
	return `${others.length + 1} so far. The latest is “${latest.label}”: ${latest.subjects} subjects, data up to ${instantText(new Date(latest.cutOffAt), 'UTC')}.`;
}

function looksSoFar(looks: Analyses['looks']): string {
	const going = looks.filter(
		(look) => look.open && (look.status === 'waiting' || look.status === 'running')
	).length;
	if (looks.length === 0) return 'None yet.';
	return `${looks.length} so far${going > 0 ? `, ${going} of them still being fitted` : ''}.`;
}

function nextSteps(
	state: StudyState,
	to: (path: string, label: string, text: string) => Pointer
): Pointer[] {
	if (!state.published)
		return [
			to(
				'/schedule',
				'Schedule',
				'Check the schedule of activities and publish it: that opens the study.'
			)
		];
	if (state.unapproved > 0)
		return [
			to(
				'/sites',
				'Sites',
				`${state.unapproved === 1 ? 'One site waits' : `${state.unapproved} sites wait`} for its approval to be recorded: nobody is enrolled before it.`
			),
			...further(state, to)
		];
	return further(state, to);
}

function further(
	state: StudyState,
	to: (path: string, label: string, text: string) => Pointer
): Pointer[] {
	if (state.people === 0 && state.subjects === 0)
		return [
			to(
				'/schedule',
				'Schedule',
				'The study is open. Next, an administrator grants roles at its sites.'
			)
		];
	if (state.subjects === 0)
		return [
			to(
				'/import',
				'Import',
				'Nobody is enrolled yet. The sites begin in the screening log; an existing study is brought in here.'
			)
		];
	return [
		to(
			'/subjects',
			'Subjects',
			`${state.subjects} ${state.subjects === 1 ? 'subject' : 'subjects'} enrolled.`
		),
		to(
			'/cuts',
			'Data cuts',
			state.cuts === 0 ? 'No cut yet. Make one before a look.' : `${state.cuts} made so far.`
		)
	];
}
