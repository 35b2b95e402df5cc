import { roleNames, type Grant } from '$lib/domain/person/roles';
import { may, type Capability } from './permission';

interface Place {
	label: string;
	/** Below the study's own address. */
	path: string;
	capability: Capability;
}

const places: Place[] = [
	{ label: 'Today', path: '', capability: 'study.read' },
	{ label: 'Windows', path: '/windows', capability: 'visit.book' },
	{ label: 'Subjects', path: '/subjects', capability: 'subject.read' },
	{ label: 'Screening', path: '/screening', capability: 'screening.read' },
	{ label: 'Re-consent', path: '/consent', capability: 'screening.read' },
	{ label: 'To sign', path: '/signing', capability: 'signature.sign' },
	{ label: 'Flow', path: '/flow', capability: 'flow.read' },
	{ label: 'Schedule', path: '/schedule', capability: 'study.read' },
	{ label: 'Sites', path: '/sites', capability: 'study.read' },
	{ label: 'Allocation', path: '/allocation', capability: 'allocation.make' },
	{ label: 'Kits', path: '/kits', capability: 'kit.read' },
	{ label: 'Unmaskings', path: '/unmaskings', capability: 'unmasking.read' },
	{ label: 'Sealed codes', path: '/codes', capability: 'code.print' },
	{ label: 'Import', path: '/import', capability: 'import.run' },
	{ label: 'Data cuts', path: '/cuts', capability: 'cut.read' },
	{ label: 'Looks', path: '/looks', capability: 'look.read' },
	{ label: 'Board room', path: '/board', capability: 'board.read' },
	{ label: 'Audit trail', path: '/audit', capability: 'audit.read' }
];

export interface NavigationLink {
	label: string;
	href: string;
}

/** The places of a study that these roles may enter. */
export const studyLinks = (grants: readonly Grant[], studyId: string): NavigationLink[] =>
	places
		.filter((place) => may(grants, place.capability, { studyId }))
		.map((place) => ({ label: place.label, href: `/studies/${studyId}${place.path}` }));

export function generalLinks(grants: readonly Grant[]): NavigationLink[] {
	const links: NavigationLink[] = [];
	if (may(grants, 'person.manage', {})) links.push({ label: 'People', href: '/people' });
	if (may(grants, 'job.read', {})) links.push({ label: 'Jobs', href: '/jobs' });
	return links;
}

/** The person's roles in a study, in words, for the corner of each page. */
export function roleWords(grants: readonly Grant[], studyId: string | null): string {
	const here = grants.filter(
		(grant) => studyId === null || grant.studyId === null || grant.studyId === studyId
	);
	return [...new Set(here.map((grant) => roleNames[grant.role]))].join(', ');
}
