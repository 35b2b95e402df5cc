import { refusals, type RefusalCode } from '$lib/refusal';
import { roleNames } from '../person/roles';

/** The audit trail in plain words: which thing, which field, from what to what. */

export const actions = ['create', 'change', 'remove', 'act', 'refused'] as const;
export type AuditAction = (typeof actions)[number];

export const actionWords: Record<AuditAction, string> = {
	create: 'made',
	change: 'changed',
	remove: 'removed',
	act: 'did',
	refused: 'refused'
};

/** What the rows of a table are called. Whatever is not here is called by its table’s name. */
export const recordWords = {
	study: 'study',
	site: 'site',
	room: 'room',
	person_role: 'role',
	protocol_version: 'protocol version',
	planned_visit: 'planned visit',
	measure: 'measure',
	planned_measure: 'measure at a planned visit',
	consent_version: 'consent version',
	screening: 'screening',
	consent: 'consent',
	upload: 'signed scan',
	reconsent_refusal: 'refusal on being asked again',
	transfer: 'move to another site',
	signature: 'signature',
	subject: 'subject',
	contact_details: 'contact details',
	study_exit: 'end of participation',
	visit: 'visit',
	appointment: 'appointment',
	measurement: 'measurement',
	contact_attempt: 'contact attempt',
	deviation: 'protocol deviation',
	mail: 'mail',
	feed: 'calendar feed',
	import_batch: 'import',
	cut: 'data cut',
	monitoring_plan: 'monitoring plan',
	look: 'look',
	look_request: 'by-arm look',
	look_result: 'by-arm result',
	report: 'report',
	closed_report: 'closed report',
	release: 'release of a report',
	released_copy: 'released copy',
	download: 'download',
	recommendation: 'recommendation',
	allocation_record: 'allocation list',
	allocation_list: 'allocation list (closed)',
	list_position: 'place in the allocation list',
	chance: 'random number of an allocation',
	minimisation: 'minimisation (closed)',
	minimisation_choice: 'choice for minimisation (closed)',
	kit_plan: 'kits of the study',
	kit_level: 'kit stock of a site',
	kit_delivery: 'delivery of kits',
	kit: 'kit',
	unmasking: 'unmasking',
	shown_arm: 'arm shown at an unmasking (closed)',
	code_print: 'sheets of sealed codes',
	code_sheet: 'sheets of sealed codes (closed)',
	sealed_code: 'sealed code',
	job_run: 'job',
	audit: 'audit trail'
} as const;
export type AuditRecord = keyof typeof recordWords;
export const auditRecords = Object.keys(recordWords) as AuditRecord[];

export const recordName = (record: string): string =>
	recordWords[record as AuditRecord] ?? record.replaceAll('_', ' ');

/** Records whose history is shown from the data point itself. */
export const historyRecords = [
	'measurement',
	'visit',
	'appointment',
	'subject',
	'screening',
	'consent',
	'signature',
	'study_exit',
	'contact_attempt',
	'deviation',
	'contact_details'
] as const;

export const auditRoleName = (role: string): string =>
	(roleNames as Record<string, string>)[role] ??
	{ system: 'Heddle itself', own: 'own account', none: 'no role' }[role] ??
	role;

const fieldNames: Record<string, string> = {
	not_done_reason: 'reason for not done',
	soft_answer: 'answer to the unusual value',
	text_value: 'value',
	entered_value: 'value as entered',
	entered_unit: 'unit as entered',
	signed_by: 'signed by',
	obtained_at: 'signed by the explainer at',
	version_since: 'follows its version since',
	taken_back_at: 'taken back at',
	taken_back_reason: 'reason for taking back',
	from_site_id: 'from',
	approved_on: 'approved on',
	reconsent: 'asked again',
	reconsent_by: 'asked again by',
	taken_at: 'taken at',
	kit_number: 'kit number',
	by: 'by',
	staff_id: 'with',
	person_id: 'person',
	valid_from: 'first day',
	valid_to: 'last day'
};
export const fieldName = (field: string): string =>
	fieldNames[field] ?? field.replace(/_id$/, '').replaceAll('_', ' ');

/** Columns that say nothing to a person, or stand in columns of their own. */
const technical = new Set([
	'id',
	'study_id',
	'site_id',
	'subject_id',
	'version',
	'calendar_uid',
	'token_hash',
	'storage_key',
	'message_id',
	'session_id',
	'form_version',
	'open_to',
	'digest'
]);

/** Of personal records, the fields that name nobody. */
const impersonal: Record<string, readonly string[]> = {
	mail: ['kind', 'status', 'attempts', 'error', 'sent_at', 'created_at']
};

export interface FieldChange {
	field: string;
	before: string | number | null;
	after: string | number | null;
}

type Row = Record<string, unknown> | null;

interface Names {
	/** Of ids: persons, measures, visits, rooms, sites. */
	of(id: string): string | undefined;
	/** An instant in the site's zone, with the zone. */
	instant(iso: string): string;
}

const isIdText = (text: string) => /^[0-9a-f]{8}(-[0-9a-f]{4}){3}-[0-9a-f]{12}$/.test(text);
const isInstantText = (text: string) =>
	/^\d{4}-\d{2}-\d{2}T\d{2}:\d{2}:\d{2}(\.\d+)?([+-]\d{2}:\d{2}|Z)$/.test(text);

function said(value: unknown, names: Names): string | number | null {
	if (value === null || value === undefined) return null;
	if (typeof value === 'number') return value;
	if (typeof value === 'boolean') return value ? 'yes' : 'no';
	if (typeof value === 'string') {
		if (value === '[secret]') return 'kept secret';
		if (isIdText(value)) return names.of(value) ?? value;
		return isInstantText(value) ? names.instant(value) : value;
	}
	return JSON.stringify(value);
}

/** What changed, field by field; `mayPersonal` opens the values that identify somebody. */
export function changesOf(
	event: { record: string; action: AuditAction; personal: boolean; before: Row; after: Row },
	names: Names,
	mayPersonal: boolean
): { changes: FieldChange[]; hidden: boolean } {
	if (event.action === 'refused') return { changes: [], hidden: false };
	const fields = [
		...new Set([...Object.keys(event.before ?? {}), ...Object.keys(event.after ?? {})])
	];
	const open = !event.personal || mayPersonal;
	const changes: FieldChange[] = [];
	let hidden = false;
	for (const field of fields) {
		if (technical.has(field)) continue;
		const before = said(event.before?.[field], names);
		const after = said(event.after?.[field], names);
		if (before === null && after === null) continue;
		if (!open && !impersonal[event.record]?.includes(field)) {
			hidden = true;
			continue;
		}
		changes.push({ field: fieldName(field), before, after });
	}
	return { changes, hidden };
}

/** 'visit.book' → 'book visit': what somebody tried. */
const attempt = (capability: string) => {
	const [thing = '', act = ''] = capability.split('.');
	return `${act.replaceAll('-', ' ')} ${thing.replaceAll('-', ' ')}`.trim();
};

/** One line that says what happened; `label` names the thing when there is a better name than its kind. */
export function sentence(
	event: { record: string; action: AuditAction; before: Row; after: Row },
	label: string | undefined
): string {
	const thing = label ? `${recordName(event.record)} ${label}` : recordName(event.record);
	switch (event.action) {
		case 'create':
			return `made: ${thing}`;
		case 'change':
			return `changed: ${thing}`;
		case 'remove':
			return `removed: ${thing}`;
		case 'act':
			if (event.record === 'audit') return 'took out: audit trail';
			if (event.after?.read || event.after?.opened) return `opened: ${thing}`;
			return `used: ${thing}`;
		case 'refused': {
			const code = event.after?.code;
			const why =
				typeof code === 'string' && code in refusals && event.after
					? refusals[code as RefusalCode].say(event.after as never)
					: 'The role does not allow it.';
			return `was turned away: ${attempt(event.record)}. ${why}`;
		}
	}
}
