import { residualWords } from '$lib/components/charts/residual';
import { trajectoryWords } from '$lib/components/charts/trajectory';
import type { TestedEstimate } from '$lib/stats/types';
import { residualData, trajectoryData } from './charts';
import {
	count,
	decimalsFor,
	estimateCells,
	fixed,
	groupedHex,
	instant,
	interval,
	significant
} from './format';
import type { LookReportInput } from './input';
import type { Names } from './names';
import { DF, heading, inBrackets, notes, paragraph, percent, plural } from './parts';
import type { Definition, ReportNode, TableNode } from './tree';
import { fill, words } from './words';

function estimateTable(
	input: LookReportInput,
	caption: string,
	rows: { label: string; unit: string; numbers: TestedEstimate }[]
): TableNode {
	return {
		kind: 'table',
		caption,
		columns: [
			{ label: 'Quantity (unit)', numeric: false },
			{ label: 'Estimate', numeric: true },
			{ label: 'SE', numeric: true },
			{ label: `${percent(input.result.model.confidence)} interval`, numeric: true },
			{ label: 'df', numeric: true },
			{ label: 't', numeric: true },
			{ label: 'p', numeric: true }
		],
		rows: rows.map(({ label, unit, numbers }) => {
			const cells = estimateCells(numbers);
			return [
				inBrackets(label, unit),
				cells.estimate,
				cells.se,
				cells.interval,
				cells.df,
				cells.t,
				cells.p
			];
		}),
		note: `SE: standard error. df: degrees of freedom (${DF[input.result.model.degreesOfFreedom]}). p: two-sided. Each row is printed to the digits of its standard error.`
	};
}

export function estimates(input: LookReportInput, names: Names): ReportNode[] {
	const { contrasts, coefficients } = input.result;
	const stopped = input.result.converged ? '' : ' (did not converge)';
	// Slopes in the order of the groups' names, so that letters run A, B whatever the reference is.
	const slopes = contrasts
		.filter((c) => c.kind === 'slope')
		.sort((a, b) => names.position(a.group) - names.position(b.group));
	const answers = [...slopes, ...contrasts.filter((c) => c.kind !== 'slope')].map((c) => ({
		...names.contrast(c),
		numbers: c
	}));
	return [
		heading('Estimates'),
		...(answers.length > 0 ? [estimateTable(input, `What the model says${stopped}`, answers)] : []),
		estimateTable(
			input,
			`All terms of the mean${stopped}`,
			coefficients.map((c) => ({ ...names.coefficient(c), numbers: c }))
		),
		...notes(input, 'lines-at-average-covariates', 'extrapolated')
	];
}

export function dependence(input: LookReportInput): ReportNode[] {
	const { result, measure } = input;
	const { icc, effectiveSampleSize: effective, counts } = result;
	const level = percent(result.model.confidence);
	const squared = measure.unit ? ` (${measure.unit}, squared)` : '';
	const sd = measure.unit ? ` (${measure.unit})` : '';
	return [
		heading('How alike the measurements of one subject are'),
		{
			kind: 'table',
			caption: 'Variance components',
			columns: [
				{ label: 'Source', numeric: false },
				{ label: `Variance${squared}`, numeric: true },
				{ label: `${level} interval`, numeric: true },
				{ label: `Standard deviation${sd}`, numeric: true }
			],
			rows: result.varianceComponents.map((v) => {
				const places = decimalsFor(v.estimate, 4);
				return [
					v.name === 'subject' ? 'Between subjects: lasting level' : 'Within subjects: left over',
					fixed(v.estimate, places),
					interval(v.lower, v.upper, places),
					significant(v.standardDeviation, 4)
				];
			}),
			note: 'Intervals by profile likelihood.'
		},
		...(icc
			? [
					paragraph(
						fill(words.icc, {
							icc: fixed(icc.estimate, 3),
							level,
							interval: interval(icc.lower, icc.upper, 3)
						})
					)
				]
			: []),
		paragraph(
			fill(words.effective, {
				observations: count(counts.observations),
				effective: effective.forMean < 10 ? fixed(effective.forMean, 1) : count(effective.forMean),
				design: fixed(effective.designEffect, 2)
			})
		),
		...(result.boundary
			? [
					{
						kind: 'caution' as const,
						tone: 'warning' as const,
						title: words.boundary.title,
						text: words.boundary.text
					},
					...notes(input, 'subject-variance-zero')
				]
			: [])
	];
}

export function fit(input: LookReportInput): ReportNode[] {
	const { result } = input;
	const { model } = result;
	const gradient = Math.abs(result.gradient);
	const coefficients = result.coefficients.length;
	const items: Definition[] = [
		{
			term: model.method === 'REML' ? 'Restricted log-likelihood' : 'Log-likelihood',
			text: fixed(result.logLikelihood, 3)
		},
		{ term: '−2 log-likelihood', text: fixed(result.minusTwoLogLikelihood, 3) },
		{ term: 'AIC', text: fixed(result.criteria.aic, 3) },
		{
			term: 'Parameters',
			text: `${result.criteria.parameters}: ${plural(coefficients, 'coefficient')} and ${plural(result.criteria.parameters - coefficients, 'variance')}`
		},
		{
			term: 'Converged',
			text: `${result.converged ? 'yes' : 'NO'}, ${plural(result.iterations, 'iteration')}; remaining slope ${gradient < 0.0001 ? 'below 0.0001' : significant(gradient, 3)}`
		},
		{
			term: 'At the edge',
			text: result.boundary ? 'yes: between-subject variance at zero' : 'no'
		}
	];
	return [
		heading('How well the model fits'),
		...(result.converged
			? []
			: [
					{
						kind: 'caution' as const,
						tone: 'warning' as const,
						title: words.notConverged.title,
						text: fill(words.notConverged.text, { iterations: count(result.iterations) })
					}
				]),
		{ kind: 'definitions', items },
		paragraph(
			`${fill(words.criterion, { parameters: String(result.criteria.parameters) })} ${words.likelihood[model.method]}`
		)
	];
}

export function figures(input: LookReportInput, names: Names): ReportNode[] {
	const lines = trajectoryData(input, names);
	const residuals = residualData(input);
	const level = percent(input.result.model.confidence);
	return [
		heading('Figures'),
		{
			kind: 'figure',
			caption: `${input.measure.name} over time: each subject's measurements, and the fitted ${lines.lines.length > 1 ? 'lines' : 'line'} with ${level} band`,
			alt: trajectoryWords(lines),
			chart: { type: 'trajectory', data: lines }
		},
		{
			kind: 'figure',
			caption: 'What the model leaves over: conditional residual against fitted value',
			alt: residualWords(residuals),
			chart: { type: 'residual', data: residuals }
		}
	];
}

export function provenance(input: LookReportInput): ReportNode[] {
	const { cut, provenance: from } = input;
	const rows: string[][] = [
		['Cut', `${cut.label}, ${cut.id}`],
		['Cut-off', instant(cut.cutOffAt)],
		['Extracted', instant(cut.extractedAt)],
		['Fingerprint of the cut', groupedHex(cut.fingerprint)],
		['Input hash', from.inputHash],
		['Code version', `Heddle ${from.appVersion}, statistics engine ${from.engineVersion}`],
		['Model', input.modelWords],
		['Seed', from.seed === null ? words.seedless : String(from.seed)],
		[
			'Software',
			Object.entries(from.softwareVersions)
				.map(([name, version]) => `${name} ${version}`)
				.join(', ')
		],
		['Made', `${instant(from.madeAt)} by ${from.madeBy}`]
	];
	return [
		heading('Where this comes from'),
		{
			kind: 'table',
			caption: 'Provenance',
			columns: [
				{ label: 'Item', numeric: false },
				{ label: 'Value', numeric: false }
			],
			rows
		},
		paragraph(words.provenance)
	];
}
