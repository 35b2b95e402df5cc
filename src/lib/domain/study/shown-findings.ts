import { checkDefinition } from './check';
import type { StudyDefinition } from './definition';
import { placeOf, placeText, type SetupSection } from './finding-place';

/** A finding as screens show it: what it says and where it is mended. */
export interface ShownFinding {
	weight: 'stops' | 'warns';
	path: string;
	say: string;
	section: SetupSection;
	/** The end of the address in set-up: 'visits?item=month-3&field=before'. */
	place: string;
}

export const shownFindings = (definition: StudyDefinition): ShownFinding[] =>
	checkDefinition(definition).map((finding) => {
		const place = placeOf(finding, definition);
		return {
			weight: finding.weight,
			path: finding.path,
			say: finding.problem.message,
			section: place.section,
			place: placeText(place)
		};
	});
