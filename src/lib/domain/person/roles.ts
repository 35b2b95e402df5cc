/** The roles of a study, and where each may be granted. What a role may do stands in permission.ts. */
export const roles = [
	'administrator',
	'data_manager',
	'coordinator',
	'nurse',
	'pharmacist',
	'investigator',
	'monitor',
	'auditor',
	'statistician',
	'independent_statistician',
	'board_member'
] as const;
export type Role = (typeof roles)[number];
export const isRole = (text: string): text is Role => (roles as readonly string[]).includes(text);

export const roleNames: Record<Role, string> = {
	administrator: 'administrator',
	data_manager: 'data manager',
	coordinator: 'study coordinator',
	nurse: 'research nurse',
	pharmacist: 'site pharmacist (unmasked)',
	investigator: 'site investigator',
	monitor: 'monitor',
	auditor: 'auditor',
	statistician: 'trial statistician (masked)',
	independent_statistician: 'independent statistician (unmasked)',
	board_member: 'monitoring board member'
};

/** Roles held at one site (or all sites of a study), for a whole study, or for the whole installation. */
export const siteRoles: readonly Role[] = [
	'coordinator',
	'nurse',
	'pharmacist',
	'investigator',
	'monitor'
];
export const installationRoles: readonly Role[] = ['administrator', 'data_manager'];
/** Roles that open closed material: a grant is in force only after a second person has confirmed it. */
export const closedRoles: readonly Role[] = ['independent_statistician', 'board_member'];

const stake: readonly Role[] = [
	'investigator',
	'statistician',
	'independent_statistician',
	'board_member'
];
const masked: readonly Role[] = [
	'data_manager',
	'coordinator',
	'nurse',
	'investigator',
	'monitor',
	'statistician'
];

const team: readonly Role[] = [...masked, 'pharmacist'];

/** Why two roles may not meet in one person (in the same study), or null when they may. The database refuses them too. */
export function whyApart(a: Role, b: Role): string | null {
	const between = (first: readonly Role[], second: readonly Role[]) =>
		(first.includes(a) && second.includes(b)) || (first.includes(b) && second.includes(a));
	if (between(['administrator'], stake))
		return 'An administrator may have no stake in the results.';
	if (between(closedRoles, team))
		return 'Whoever may see closed material holds no role in the study team.';
	if (between(['pharmacist'], masked))
		return 'A pharmacist knows what the masked must not know, and holds no masked role.';
	if (a !== b && closedRoles.includes(a) && closedRoles.includes(b))
		return 'The board decides on what the independent statistician reports: they are two people.';
	return null;
}

/** A grant as the door needs it: already in force today. */
export interface Grant {
	role: Role;
	/** Null: every study of the installation. */
	studyId: string | null;
	/** Null: every site of the study. */
	siteId: string | null;
}
