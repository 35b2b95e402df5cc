import type { AnalysisResult, Tested } from '$lib/stats';

/** Six significant digits or as many as asked; what is small or large in powers of ten. */
export function digits(value: number | null, significant = 6): string {
	if (value === null) return '–';
	if (value === 0) return '0';
	const size = Math.abs(value);
	return size >= 1e-4 && size < 1e7
		? String(Number(value.toPrecision(significant)))
		: value.toExponential(3);
}

const probability = (p: number) =>
	p < 1e-4 ? (p === 0 ? '< 1e-300' : p.toExponential(1)) : p.toFixed(4);

/** Rows of cells as text: the first column to the left, the others to the right. */
export function alignedRows(rows: readonly (readonly string[])[]): string {
	const widths = rows[0]!.map((_, j) => Math.max(...rows.map((row) => [...row[j]!].length)));
	const pad = (cell: string, j: number) => {
		const blank = ' '.repeat(widths[j]! - [...cell].length);
		return j === 0 ? cell + blank : blank + cell;
	};
	return rows.map((row) => row.map(pad).join('  ').trimEnd()).join('\n');
}

function tested(title: string, estimates: readonly Tested[], limits: [string, string]): string[] {
	if (estimates.length === 0) return [];
	const withRatios = estimates.some((e) => e.ratio !== null);
	const head = [title, 'estimate', 'se', 'df', 't', 'p', ...limits];
	const rows = estimates.map((e) => [
		e.name,
		digits(e.estimate),
		digits(e.se),
		digits(e.df),
		digits(e.t),
		probability(e.p),
		digits(e.lower),
		digits(e.upper)
	]);
	if (!withRatios) return [alignedRows([head, ...rows])];
	return [
		alignedRows([
			[...head, 'ratio', ...limits],
			...rows.map((row, i) => {
				const ratio = estimates[i]!.ratio;
				return [
					...row,
					digits(ratio?.estimate ?? null),
					digits(ratio?.lower ?? null),
					digits(ratio?.upper ?? null)
				];
			})
		])
	];
}

const methods = { reml: 'REML', ml: 'ML' };

/** A result as text to read, for people. */
export function resultTable(result: AnalysisResult): string {
	const { plan } = result;
	const level = `${Number(((plan.confidence ?? 0.95) * 100).toPrecision(4))} %`;
	const limits: [string, string] = [`${level} from`, 'to'];
	const left = result.dropped.map(
		(d) =>
			`${d.rows} without ${d.reason === 'outcome' ? 'an outcome' : 'a value'} in “${d.variable}”`
	);
	const parts = [
		`${plan.outcome}${plan.scale === 'log' ? ' (natural logarithm)' : ''}: ${result.observations} rows of ${result.subjects} subjects, ${methods[plan.method]}, ${plan.degreesOfFreedom} degrees of freedom.` +
			(left.length > 0 ? `\nLeft out: ${left.join(', ')}.` : ''),
		...tested('coefficient', result.coefficients, limits),
		...tested('contrast', result.contrasts, limits),
		alignedRows([
			['covariance of the outcomes', 'estimate', ...limits],
			...[...result.varianceComponents, ...(result.icc ? [result.icc] : [])].map((c) => [
				c.name,
				digits(c.estimate),
				digits(c.lower),
				digits(c.upper)
			])
		]),
		alignedRows([
			['log-likelihood', digits(result.logLikelihood, 10)],
			[`AIC (${result.parameters} parameters)`, digits(result.aic, 10)],
			['BIC by rows', digits(result.bic.rows, 10)],
			['BIC by subjects', digits(result.bic.subjects, 10)],
			['effective sample size for the mean', digits(result.effectiveSampleSize.mean)],
			...result.contrasts.map((c) => [
				`effective sample size for “${c.name}”`,
				digits(c.effectiveSampleSize)
			]),
			['slope of the likelihood at the end', digits(result.gradientNorm)]
		]),
		...result.warnings.map((sentence) => `Note: ${sentence}`)
	];
	return `${parts.join('\n\n')}\n`;
}
