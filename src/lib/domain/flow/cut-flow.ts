import { isMeasured, type CutContent, type CutSubject } from '../cut/content';
import { enrolmentAgainstPlan, type SitePlan } from './enrolment-plan';
import { flowOf, type Flow } from './flow';

export interface CutFlow {
	flow: Flow;
	plan: SitePlan[];
}

/** Each allocated subject's letter, and every letter there is. */
export interface Letters {
	of: ReadonlyMap<string, string>;
	all: readonly string[];
}

/** Randomised, and no arm is on record: an allocation made elsewhere before the data were taken over. */
const unknownArm = 'Arm not on record';

/**
 * The flow of participants and enrolment against plan as they stood at the cut-off; by arm, coded, where letters are
 * handed in. Null for a cut of the first format, which holds no screening log.
 */
export function cutFlow(content: CutContent, letters: Letters | null): CutFlow | null {
	const { screening, primaryMeasure, randomises } = content;
	if (!screening || primaryMeasure === undefined || randomises === undefined) return null;
	const measured = (subject: CutSubject) =>
		subject.visits.some(({ values }) => {
			const value = values[primaryMeasure];
			return value !== undefined && isMeasured(value);
		});
	const byArm = randomises && letters !== null;
	const armOf = (subject: CutSubject) => {
		const letter = letters?.of.get(subject.id);
		return letter === undefined ? unknownArm : `Arm ${letter}`;
	};
	const subjects = content.subjects.map((subject) => ({
		screened: subject.screened === true,
		randomised: subject.randomisedOn !== null,
		arm: byArm ? armOf(subject) : null,
		exits: subject.exits.map(({ kind }) => kind),
		measured: measured(subject)
	}));
	const arms = byArm
		? [
				...[...letters.all].sort().map((letter) => `Arm ${letter}`),
				...(subjects.some((each) => each.randomised && each.arm === unknownArm) ? [unknownArm] : [])
			]
		: null;
	const months = new Map<string, { site: string; month: string; n: number }>();
	for (const { site, enrolledOn } of content.subjects) {
		const month = enrolledOn.slice(0, 7);
		const held = months.get(`${site} ${month}`);
		if (held) held.n += 1;
		else months.set(`${site} ${month}`, { site, month, n: 1 });
	}
	return {
		flow: flowOf(
			screening.flatMap(({ n, ...alike }) => Array.from({ length: n }, () => alike)),
			subjects,
			{ randomises, arms }
		),
		plan: enrolmentAgainstPlan(
			content.enrolmentPlan ?? undefined,
			content.sites,
			[...months.values()],
			// East of Greenwich the next month may have begun, and somebody be enrolled in it.
			[content.cutOffAt.slice(0, 7), ...content.subjects.map((each) => each.enrolledOn.slice(0, 7))]
				.sort()
				.at(-1) as string
		)
	};
}
