import {
	axisTitle,
	breadth,
	round,
	scale,
	textWidth,
	ticks,
	type Axis,
	type Frame,
	type Tick
} from './axes';

export interface ResidualData {
	fitted: Axis;
	residual: Axis;
	points: readonly { fitted: number; residual: number }[];
	/** The residual standard deviation of the fit; lines are drawn at twice it. */
	sd?: number | null;
}

export interface ResidualGeometry {
	frame: Frame;
	xTicks: Tick[];
	yTicks: Tick[];
	points: { x: number; y: number }[];
	zero: number;
	limits: { y: number; text: string }[];
}

const usable = (p: { fitted: number; residual: number }) =>
	Number.isFinite(p.fitted) && Number.isFinite(p.residual);
const usableSd = (sd: number | null | undefined): sd is number =>
	typeof sd === 'number' && Number.isFinite(sd) && sd > 0;

/** Where everything stands, or null when there is nothing to draw. Zero is always in the middle. */
export function residualGeometry(
	data: ResidualData,
	width: number,
	height: number
): ResidualGeometry | null {
	const points = data.points.filter(usable);
	const xs = breadth(points.map((p) => p.fitted));
	if (!xs) return null;
	const far = Math.max(...points.map((p) => Math.abs(p.residual)));
	const reach = Math.max(far, usableSd(data.sd) ? 2.2 * data.sd : 0) || 1;

	const top = 34;
	const bottom = height - 50;
	const y = scale([-reach, reach], [bottom, top], true);
	const yTicks = ticks(y, 5);
	const left = Math.ceil(Math.max(24, ...yTicks.map((t) => textWidth(t.text)))) + 14;
	const right = Math.max(left + 40, width - (usableSd(data.sd) ? 54 : 16));
	const x = scale(xs, [left, right], true);
	return {
		frame: { left, right, top, bottom },
		xTicks: ticks(x, width < 440 ? 4 : 6),
		yTicks,
		points: points.map((p) => ({ x: round(x(p.fitted)), y: round(y(p.residual)) })),
		zero: round(y(0)),
		limits: usableSd(data.sd)
			? [
					{ y: round(y(2 * data.sd)), text: '2 SD' },
					{ y: round(y(-2 * data.sd)), text: '−2 SD' }
				]
			: []
	};
}

/** The chart in words. */
export function residualWords(data: ResidualData): string {
	const points = data.points.filter(usable);
	const start = `${axisTitle(data.residual)} against ${axisTitle(data.fitted)}: ${points.length} point${points.length === 1 ? '' : 's'}, one for each measurement.`;
	if (!usableSd(data.sd) || points.length === 0) return start;
	const sd = data.sd;
	const beyond = points.filter((p) => Math.abs(p.residual) > 2 * sd).length;
	return `${start} ${beyond} of them (${Math.round((100 * beyond) / points.length)}%) lie more than two residual standard deviations from zero; about 5% would if the residuals were normal.`;
}
