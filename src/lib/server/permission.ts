import type { Grant, Role } from '$lib/domain/person/roles';

/**
 * The one table of who may do what. What it does not mention is "no". Site roles act at their sites, study roles in
 * their study; an administrator manages accounts and by that alone sees no study data.
 */
const table = {
	'person.manage': ['administrator'],
	'role.grant': ['administrator'],
	'job.read': ['administrator'],
	'security.read': ['administrator'],

	'study.create': ['data_manager'],
	'study.read': [
		'data_manager',
		'coordinator',
		'nurse',
		'pharmacist',
		'investigator',
		'monitor',
		'auditor',
		'statistician',
		'independent_statistician'
	],
	'study.enter': [
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
	],
	'study.edit': ['data_manager'],
	'study.publish': ['data_manager'],
	'site.approve': ['data_manager'],
	'site.close': ['data_manager', 'coordinator'],
	'import.run': ['data_manager'],

	'subject.read': [
		'data_manager',
		'coordinator',
		'nurse',
		'pharmacist',
		'investigator',
		'monitor',
		'auditor'
	],
	'contact.read': ['coordinator', 'investigator'],
	'contact.edit': ['coordinator'],
	'screening.read': ['data_manager', 'coordinator', 'investigator', 'monitor', 'auditor'],
	'screening.edit': ['coordinator', 'investigator'],
	'consent.record': ['coordinator', 'investigator'],
	/** The signed form names the person: as contact details, for the site's own. */
	'consent.scan': ['coordinator', 'investigator'],
	'subject.enrol': ['coordinator', 'investigator'],
	'subject.randomise': ['coordinator', 'investigator'],
	'subject.exit': ['coordinator', 'investigator'],
	'subject.correct': ['coordinator', 'investigator'],
	/** To be shown one subject's arm in an emergency; to write down that an arm became known; to read that it did. */
	'subject.unmask': ['investigator'],
	'unmasking.record': ['coordinator', 'investigator'],
	'unmasking.read': [
		'data_manager',
		'investigator',
		'monitor',
		'auditor',
		'independent_statistician'
	],
	/** Sheets with arms on them: for who is not masked. */
	'code.print': ['pharmacist', 'independent_statistician'],

	'kit.read': ['data_manager', 'coordinator', 'pharmacist', 'investigator', 'monitor', 'auditor'],
	'kit.plan': ['data_manager'],
	'kit.keep': ['coordinator', 'pharmacist'],
	/** To plan, send, receive or write off: each act asks the door for its own right again. */
	'kit.act': ['data_manager', 'coordinator', 'pharmacist'],
	'subject.transfer': ['coordinator', 'investigator'],
	/** Counts of who came in, who left and why; no subject is named. */
	'flow.read': [
		'data_manager',
		'coordinator',
		'investigator',
		'monitor',
		'auditor',
		'statistician',
		'independent_statistician'
	],

	/** To read what was signed, with the record it is about. */
	'signature.read': ['data_manager', 'coordinator', 'investigator', 'monitor', 'auditor'],
	/** To sign at all; each kind of record asks the door for its own right again. */
	'signature.sign': ['investigator'],
	'signature.eligibility': ['investigator'],

	'visit.book': ['coordinator'],
	'visit.chase': ['coordinator'],
	'visit.measure': ['nurse', 'investigator'],
	/** To keep a value: an open one asks for the right to measure, another one for the role its measure names. */
	'visit.record': ['nurse', 'investigator', 'pharmacist'],
	'feed.own': ['coordinator', 'nurse', 'pharmacist', 'investigator'],

	'cut.make': ['data_manager', 'statistician'],
	'cut.read': ['data_manager', 'statistician', 'independent_statistician', 'auditor'],
	'cut.export': ['data_manager', 'statistician', 'independent_statistician'],
	'plan.sign': ['statistician'],
	'look.read': ['data_manager', 'statistician', 'independent_statistician', 'auditor'],
	/** To ask for a look, sign the plan or see to a release: each act asks the door for its own right again. */
	'look.act': ['data_manager', 'statistician', 'independent_statistician'],
	'look.pooled': ['statistician', 'independent_statistician'],
	'look.by-arm': ['independent_statistician'],
	'allocation.make': ['independent_statistician'],

	'report.make': ['statistician', 'independent_statistician'],
	'report.read': ['data_manager', 'statistician', 'independent_statistician', 'auditor'],
	'report.release': ['statistician', 'independent_statistician'],
	'report.approve-release': ['data_manager', 'independent_statistician'],
	'board.read': ['board_member', 'independent_statistician', 'statistician', 'data_manager'],
	'board.download': ['board_member'],
	'board.recommend': ['board_member'],

	'audit.read': ['auditor', 'monitor', 'data_manager'],
	'audit.export': ['auditor']
} satisfies Record<string, readonly Role[]>;

export type Capability = keyof typeof table;

export interface Scope {
	studyId?: string | null;
	siteId?: string | null;
}

export const rolesFor = (capability: Capability): readonly Role[] => table[capability];

function covers(grant: Grant, scope: Scope): boolean {
	if (scope.studyId && grant.studyId !== null && grant.studyId !== scope.studyId) return false;
	// A question about the whole study is not answered by a role at one site, unless no site is named.
	if (scope.siteId && grant.siteId !== null && grant.siteId !== scope.siteId) return false;
	// Creating studies and managing accounts are installation-wide: only a grant without a study allows them.
	if (!scope.studyId && grant.studyId !== null) return false;
	return true;
}

/** The role by which these grants allow the capability in this scope; null when they do not. */
export function roleAllowing(
	grants: readonly Grant[],
	capability: Capability,
	scope: Scope
): Role | null {
	const allowed: readonly Role[] = table[capability];
	return grants.find((grant) => allowed.includes(grant.role) && covers(grant, scope))?.role ?? null;
}

export const may = (grants: readonly Grant[], capability: Capability, scope: Scope): boolean =>
	roleAllowing(grants, capability, scope) !== null;

/** The sites of the study at which these grants allow the capability; null: all of them. */
export function sitesAllowing(
	grants: readonly Grant[],
	capability: Capability,
	studyId: string
): string[] | null {
	const allowed: readonly Role[] = table[capability];
	const here = grants.filter((grant) => allowed.includes(grant.role) && covers(grant, { studyId }));
	if (here.some((grant) => grant.siteId === null)) return null;
	return here.flatMap((grant) => grant.siteId ?? []);
}
