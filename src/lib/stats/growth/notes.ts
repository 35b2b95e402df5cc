import type { Counts, DegreesOfFreedom, ModelDescription, Note } from '../types.js';

const dfWords: Record<DegreesOfFreedom, string> = {
	'kenward-roger': 'Kenward–Roger standard errors and degrees of freedom',
	satterthwaite: 'Satterthwaite degrees of freedom',
	naive: 'Degrees of freedom'
};

function count(n: number, one: string, many = `${one}s`): string {
	return `${n} ${n === 1 ? one : many}`;
}

/** The sentences a reader must see beside the numbers. */
export function notesOf(
	model: ModelDescription,
	counts: Counts,
	fit: { converged: boolean; boundary: readonly string[] },
	askedTimes: readonly number[]
): Note[] {
	const notes: Note[] = [];
	const add = (code: Note['code'], sentence: string) => notes.push({ code, sentence });
	if (!fit.converged) {
		add(
			'not-converged',
			'The search for the best variances did not settle; treat every number here as provisional.'
		);
	}
	if (fit.boundary.length > 0) {
		add(
			'subject-variance-zero',
			`The variance between subjects is estimated as zero: these data show no lasting offset of subjects. ${dfWords[model.degreesOfFreedom]} are those of the model without it.`
		);
	}
	if (counts.droppedOutcomes > 0 || counts.droppedRows > 0) {
		const missing = counts.missingByVariable.map((m) => `“${m.name}”`).join(' or ');
		const why = [
			...(counts.droppedOutcomes > 0 ? [`${counts.droppedOutcomes} without an outcome`] : []),
			...(counts.droppedRows > 0
				? [`${counts.droppedRows} with an outcome but without ${missing}`]
				: [])
		];
		add(
			'rows-dropped',
			`Of ${count(counts.rows, 'row')}, ${counts.observations} were used. Left out: ${why.join(', ')}. The model takes what is missing as missing at random.`
		);
	}
	if (counts.droppedSubjects > 0) {
		add(
			'subjects-dropped',
			`${count(counts.droppedSubjects, 'subject has', 'subjects have')} no usable row and ${counts.droppedSubjects === 1 ? 'is' : 'are'} not in the analysis.`
		);
	}
	if (model.linesAt.length > 0) {
		add(
			'lines-at-average-covariates',
			'The fitted lines are for covariates at their average over subjects.'
		);
	}
	if (model.randomIntercept) {
		add(
			'effective-size-is-for-the-mean',
			'The effective sample size is for the mean; a change within subjects may be known better than it suggests.'
		);
	}
	const { from, to } = model.timeRange;
	if (askedTimes.some((time) => time < from || time > to)) {
		add(
			'extrapolated',
			`Some of the times asked for lie outside the observed ${from} to ${to}; the line is only assumed to go on straight there.`
		);
	}
	return notes;
}
