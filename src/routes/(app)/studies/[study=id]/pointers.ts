import type { Role } from '$lib/domain/person/roles';
import type { StudyState } from '$lib/domain/visit/today.reads.server';

export interface Pointer {
	href: string;
	label: string;
	text: string;
}

/** Where each role's work is, when it is not on this page itself. */
export function pointersFor(
	roles: ReadonlySet<Role>,
	studyId: string,
	state: StudyState | null,
	screenings: number | null
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
	if (roles.has('monitor') || roles.has('auditor'))
		found.push(
			to('/audit', 'Audit trail', 'Who did what, when and why; to filter and to follow one record.')
		);
	if (roles.has('auditor'))
		found.push(to('/subjects', 'Subjects', 'The record as the sites see it, to read.'));
	if (roles.has('statistician'))
		found.push(
			to('/cuts', 'Data cuts', 'Freeze the data that a look is made from.'),
			to('/looks', 'Looks', 'Choose a question and fit it to a cut, pooled over everybody.')
		);
	if (roles.has('independent_statistician'))
		found.push(
			to('/looks', 'Looks', 'The planned looks, by arm. Each further one is counted and printed.'),
			to('/board', 'Board room', 'Reports that are made and released for the board.')
		);
	if (roles.has('board_member'))
		found.push(to('/board', 'Board room', 'The reports released to you, and the recommendation.'));
	return found;
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
	if (state.people === 0)
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
