import type { ResidualData } from '$lib/components/charts/residual';
import type { TrajectoryData } from '$lib/components/charts/trajectory';
import type { GrowthResult } from '$lib/stats/types';
import type { LookReportInput } from './input';
import { names as namesOf, type Names } from './names';

const capital = (text: string) => text.charAt(0).toUpperCase() + text.slice(1);

type ChartInput = Pick<LookReportInput, 'kind' | 'measure' | 'time' | 'group'> & {
	result: GrowthResult;
};

/** Subjects over time with the fitted lines over them: the same for screen and paper. */
export function trajectoryData(
	input: ChartInput,
	names: Names = namesOf(input as LookReportInput)
): TrajectoryData {
	const { result, measure, time } = input;
	return {
		x: { label: capital(time.name), unit: time.unit },
		y: { label: measure.name, unit: measure.unit },
		subjects: result.trajectories.map((t) => ({
			group: names.position(t.group),
			points: t.points.map((p) => ({ x: p.time, y: p.outcome }))
		})),
		lines: result.fittedLines
			.map((l) => ({
				label: l.group === null ? 'Everyone' : names.group(l.group),
				group: names.position(l.group),
				points: l.points.map(({ time: x, estimate, lower, upper }) => ({
					x,
					estimate,
					lower,
					upper
				}))
			}))
			.sort((a, b) => a.group - b.group)
	};
}

/** Conditional residuals against fitted values. */
export function residualData(input: Pick<ChartInput, 'measure' | 'result'>): ResidualData {
	const { result, measure } = input;
	return {
		fitted: { label: 'Fitted value', unit: measure.unit },
		residual: { label: 'Conditional residual', unit: measure.unit },
		points: result.residuals.map((r) => ({ fitted: r.fitted, residual: r.conditional })),
		sd: result.varianceComponents.find((v) => v.name === 'residual')?.standardDeviation ?? null
	};
}
