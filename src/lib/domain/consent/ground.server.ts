import type { Reader } from '$lib/server/change';
import { findPartialDate, type PartialDate, type PlainDate } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import { formKey, formsInForce } from '../amendment/amendment';
import {
	consentNotBefore,
	newestOf,
	type PublishedVersion
} from '../amendment/versions.reads.server';
import type { StudyDefinition } from '../study/definition';
import { whyNot, type Assent, type ConsentGround, type GivenConsent } from './consent';

/** The birth date among somebody's characteristics, as far as the study asks for one and it is known. */
export function birthDateOf(
	definition: Pick<StudyDefinition, 'characteristics'>,
	known: unknown
): PartialDate | null {
	const asked = definition.characteristics.find((each) => each.kind === 'birth-date');
	const value = asked && (known as Record<string, unknown> | null)?.[asked.key];
	return typeof value === 'string' ? findPartialDate(value) : null;
}

/** What a consent to a version is held against. */
export function groundFor(
	versions: readonly PublishedVersion[],
	number: number,
	on: PlainDate,
	born: PartialDate | null
): ConsentGround {
	const version = versions.find((each) => each.number === number) ?? newestOf(versions);
	return {
		forms: formsInForce(versions, number),
		on,
		notBefore: consentNotBefore(versions, number),
		minors: version.definition.minors ?? null,
		born
	};
}

export interface ConsentRow extends GivenConsent {
	id: string;
	label: string;
}

/** The consents of a screening or a subject, by the site's calendar. */
export async function consentsOf(
	reader: Reader,
	of: { screeningId: string } | { subjectId: string },
	zone: string
): Promise<ConsentRow[]> {
	const rows = await reader
		.selectFrom('consent as c')
		.innerJoin('consent_version as v', 'v.id', 'c.consent_version_id')
		.select([
			'c.id',
			'c.signed_at',
			'c.signed_by',
			'c.minor',
			'c.assent',
			'c.copy_given',
			'c.withdrawn_on',
			'v.label',
			'v.language'
		])
		.$if('screeningId' in of, (q) =>
			q.where('c.screening_id', '=', (of as { screeningId: string }).screeningId)
		)
		.$if('subjectId' in of, (q) =>
			q.where('c.subject_id', '=', (of as { subjectId: string }).subjectId)
		)
		.orderBy('c.signed_at')
		.execute();
	return rows.map((row) => ({
		id: row.id,
		label: row.label,
		form: formKey(row),
		signedOn: dateInZone(row.signed_at, zone),
		signedBy: row.signed_by as GivenConsent['signedBy'],
		minor: row.minor,
		assent: row.assent as Assent | null,
		copyGiven: row.copy_given,
		withdrawnOn: row.withdrawn_on as PlainDate | null
	}));
}

/** Why none of these consents counts, in words; null when one does. */
export function noneCounts(consents: readonly ConsentRow[], ground: ConsentGround): string | null {
	if (consents.length === 0) return '';
	const why: string[] = [];
	for (const consent of consents) {
		const reason = whyNot(consent, ground);
		if (reason === null) return null;
		why.push(`Version ${consent.label} does not count: ${reason}.`);
	}
	return [...new Set(why)].join(' ');
}
