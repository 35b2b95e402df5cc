import { closedRoles, installationRoles, roleNames, siteRoles, whyApart, type Role } from './roles';

/** A grant as the delegation log shows it. Dates are 'YYYY-MM-DD'. */
export interface GrantTerm {
	role: Role;
	studyId: string | null;
	validFrom: string;
	validTo: string | null;
	endedAt: Date | null;
	confirmed: boolean;
}

export type GrantState = 'in force' | 'to come' | 'over' | 'waiting';

export const grantWords: Record<GrantState, string> = {
	'in force': 'in force',
	'to come': 'to come',
	over: 'over',
	waiting: 'waits for a second administrator'
};

export function grantState(grant: GrantTerm, today: string): GrantState {
	if (grant.endedAt || (grant.validTo !== null && grant.validTo < today)) return 'over';
	if (closedRoles.includes(grant.role) && !grant.confirmed) return 'waiting';
	return grant.validFrom > today ? 'to come' : 'in force';
}

const lastDay = (grant: Pick<GrantTerm, 'validTo' | 'endedAt'>): string => {
	const ended = grant.endedAt?.toISOString().slice(0, 10);
	return (
		[grant.validTo, ended].filter((day): day is string => Boolean(day)).sort()[0] ?? '9999-12-31'
	);
};

/** Why a role cannot be granted beside those held, or null. Only grants that meet in time and in a study count. */
export function whyNotBeside(
	wanted: Pick<GrantTerm, 'role' | 'studyId' | 'validFrom' | 'validTo'>,
	held: readonly GrantTerm[]
): string | null {
	for (const other of held) {
		const until = lastDay(other);
		if (until < other.validFrom) continue;
		const meet = other.validFrom <= (wanted.validTo ?? '9999-12-31') && until >= wanted.validFrom;
		const administrator = wanted.role === 'administrator' || other.role === 'administrator';
		const sameStudy =
			administrator ||
			other.studyId === null ||
			wanted.studyId === null ||
			other.studyId === wanted.studyId;
		const why = meet && sameStudy ? whyApart(wanted.role, other.role) : null;
		if (why) return `${why} Held already: ${roleNames[other.role]}.`;
	}
	return null;
}

/** Why a role cannot be granted at this place, or null. */
export function whyNotHere(
	role: Role,
	studyId: string | null,
	siteId: string | null
): string | null {
	if (role === 'administrator' && studyId !== null)
		return 'An administrator works for the whole installation: choose no study.';
	if (!installationRoles.includes(role) && studyId === null) return 'Choose the study.';
	if (siteId !== null && !siteRoles.includes(role))
		return `A ${roleNames[role]} works for the whole study: choose no site.`;
	return null;
}
