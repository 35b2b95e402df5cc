import { z } from 'zod';
import { canonical } from '../cut/canonical';

/** The rules of electronic signatures: what is shown, what it means, whether it still stands. */

/** What a signature may mean, with the sentence that stands beside the button and is kept. */
export const meanings = {
	eligibility: 'I have checked the eligibility of this person and confirm it.',
	responsibility: 'I take responsibility for this record.',
	review: 'I have reviewed this record.',
	approval: 'I approve this record.'
} as const;
export type Meaning = keyof typeof meanings;
export const meaningKeys = Object.keys(meanings) as [Meaning, ...Meaning[]];

/** Kinds of records that can be signed. */
export const recordKinds = ['eligibility'] as const;
export type RecordKind = (typeof recordKinds)[number];

export const recordKindNames: Record<RecordKind, string> = { eligibility: 'eligibility checklist' };

/** The meanings that a signature of each kind of record may have, the usual one first. */
export const meaningsOf: Record<RecordKind, readonly [Meaning, ...Meaning[]]> = {
	eligibility: ['eligibility']
};

/** How the canonical text is made from a sheet. A change of the shape below takes the next number. */
export const formVersion = 1;

const line = z.strictObject({ key: z.string(), label: z.string(), value: z.string() });
const sheet = z.strictObject({
	form: z.literal(formVersion),
	record: z.strictObject({ kind: z.string(), id: z.string() }),
	title: z.string(),
	lines: z.array(line)
});
export type SheetLine = z.output<typeof line>;
/** Exactly what the signer sees of a record, line by line; it can be shown again without the record. */
export type Sheet = z.output<typeof sheet>;

/** The one text of a sheet: JSON by RFC 8785, in UTF-8. Its SHA-256 is what a signature is bound to. */
export const sheetText = (of: Sheet): string => canonical(of);

/** The sheet that a kept text holds; null when it holds none. */
export function readSheet(text: string): Sheet | null {
	try {
		return sheet.parse(JSON.parse(text));
	} catch {
		return null;
	}
}

export interface Difference {
	label: string;
	/** Null where the line is not there. */
	before: string | null;
	after: string | null;
}

/** What stands otherwise now than when it was signed, line by line; every line when the record is gone. */
export function differencesOf(signed: Sheet, now: Sheet | null): Difference[] {
	const after = new Map((now?.lines ?? []).map((each) => [each.key, each]));
	const before = new Map(signed.lines.map((each) => [each.key, each]));
	const found: Difference[] = [];
	if (now && now.title !== signed.title)
		found.push({ label: 'Title', before: signed.title, after: now.title });
	for (const was of signed.lines) {
		const is = after.get(was.key);
		if (!is) found.push({ label: was.label, before: was.value, after: null });
		else if (is.label !== was.label) {
			found.push({ label: was.label, before: was.value, after: null });
			found.push({ label: is.label, before: null, after: is.value });
		} else if (is.value !== was.value)
			found.push({ label: was.label, before: was.value, after: is.value });
	}
	for (const is of now?.lines ?? [])
		if (!before.has(is.key)) found.push({ label: is.label, before: null, after: is.value });
	return found;
}

export interface KeptSignature {
	record: string;
	recordId: string;
	content: string;
	sha256: string;
	/** Whether signer, meaning, instant and record are the ones that were tied to this content. */
	tied: boolean;
}

export type Standing = 'stands' | 'broken' | 'damaged';

/**
 * Whether a signature stands: `damaged` when the kept content is not what was signed, or the row is not the one that
 * was made; `broken` when the record says something else now (null: it is gone).
 */
export function standingOf(
	kept: KeptSignature,
	sha256Of: (text: string) => string,
	now: string | null
): Standing {
	if (!kept.tied || sha256Of(kept.content) !== kept.sha256) return 'damaged';
	const held = readSheet(kept.content);
	if (!held || held.record.kind !== kept.record || held.record.id !== kept.recordId)
		return 'damaged';
	return now !== null && sha256Of(now) === kept.sha256 ? 'stands' : 'broken';
}

/** One change of a record after it was signed: what it said before and after, in one text each. */
export interface LaterChange {
	at: Date;
	by: string;
	before: string;
	after: string;
}

/** The change since which the record has not said again what was signed; null when no change explains it. */
export function brokenBy(changes: readonly LaterChange[]): LaterChange | null {
	const signed = changes[0]?.before;
	let since: LaterChange | null = null;
	for (const change of changes) {
		if (change.after === signed) since = null;
		else since ??= change;
	}
	return since;
}

/** What a person must give to sign: both the address and the password after any break, else the password. */
export const mustGive = (signingSince: Date | null): 'address and password' | 'password' =>
	signingSince === null ? 'address and password' : 'password';
