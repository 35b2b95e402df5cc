import type { Reader } from '$lib/server/change';
import type { Capability } from '$lib/server/permission';
import type { LaterChange, RecordKind, Sheet } from './signature';

/** A record as it stands, ready to be shown and signed. */
export interface Signable {
	recordId: string;
	studyId: string;
	siteId: string | null;
	/** For a list: the site's name. */
	place: string;
	sheet: Sheet;
	/** Why it cannot be signed now; null when it can. */
	obstacle: string | null;
}

/** What a kind of record brings along to be signed. One file for each kind, beside its concept. */
export interface SignableKind {
	kind: RecordKind;
	/** Who may sign it. */
	capability: Capability;
	/** These records as they stand; `hold` keeps them from changing until the transaction is over. */
	find(reader: Reader, recordIds: readonly string[], hold?: boolean): Promise<Signable[]>;
	/** Records of the study that may wait for a signature at these sites (null: all), the oldest first. */
	waiting(
		reader: Reader,
		studyId: string,
		sites: readonly string[] | null,
		limit: number
	): Promise<string[]>;
	/** What changed in the record's signed part after the event `after` of the audit trail, in order. */
	changesAfter(reader: Reader, recordId: string, after: string): Promise<LaterChange[]>;
}
