import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { formsInForce } from '../amendment/amendment';
import { newestOf, publishedVersions } from '../amendment/versions.reads.server';
import type { Minors } from './consent';
import { consentChoices, type ConsentChoices } from './consent.reads.server';

export interface ConsentSet {
	choices: ConsentChoices;
	/** Forms of the version in force, by label and language. */
	forms: string[];
	minors: Minors | null;
}

/** What recording a consent at a site needs to know. */
export const getConsentSet = (
	actor: Actor,
	studyId: string,
	site: { id: string; today: string }
): Promise<ConsentSet> =>
	read(actor, 'consent.record', { studyId, siteId: site.id }, async (reader) => {
		const versions = await publishedVersions(reader, studyId);
		const newest = newestOf(versions);
		return {
			choices: await consentChoices(reader, studyId, site),
			forms: [...formsInForce(versions, newest.number)],
			minors: newest.definition.minors ?? null
		};
	});
