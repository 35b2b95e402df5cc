import type { BuiltDesign } from '../design/build-model-design.js';
import type { ModelFit } from '../fit/fit-model.js';

const list = (names: readonly string[]) => names.map((name) => `“${name}”`).join(', ');

function rowsLeftOut({ counts }: BuiltDesign): string[] {
	const { rows, observations, droppedOutcomes, droppedRows, missingByVariable } = counts;
	if (droppedOutcomes + droppedRows === 0) return [];
	const reasons = [
		...(droppedOutcomes > 0 ? [`${droppedOutcomes} without an outcome`] : []),
		...(droppedRows > 0
			? [
					`${droppedRows} with an outcome but without ${missingByVariable.map((m) => `“${m.name}”`).join(' or ')}`
				]
			: [])
	];
	return [
		`Of ${rows} rows, ${observations} were used. Left out: ${reasons.join(', ')}. The model takes what is missing as missing at random.`
	];
}

function subjectsLeftOut({ counts: { droppedSubjects } }: BuiltDesign): string[] {
	if (droppedSubjects === 0) return [];
	return [
		droppedSubjects === 1
			? 'One subject has no usable row and is not in the analysis.'
			: `${droppedSubjects} subjects have no usable row and are not in the analysis.`
	];
}

/** The sentences a reader must see beside the numbers: of the fit first, then of the data. */
export function warningsOf(built: BuiltDesign, fit: ModelFit, limits: boolean): string[] {
	return [
		...fit.warnings,
		...(limits
			? []
			: [
					`Limits of the ${fit.parameters.length} parts of the covariance were not looked for: with so many they take long. They can be asked for.`
				]),
		...built.design.aliased.map(({ name, by }) =>
			by.length === 0
				? `The coefficient “${name}” was left out: no usable row bears on it.`
				: `The coefficient “${name}” was left out: ${list(by)} ${by.length === 1 ? 'determines' : 'determine'} it in the usable rows.`
		),
		...rowsLeftOut(built),
		...subjectsLeftOut(built),
		...(built.baseline
			? [
					`The ${built.baseline.rows === 1 ? 'outcome' : `${built.baseline.rows} outcomes`} at ${built.baseline.at} became baseline values and ${built.baseline.rows === 1 ? 'is no outcome' : 'are no outcomes'} of the model.`
				]
			: [])
	];
}
