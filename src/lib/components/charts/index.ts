export { default as ChartFigure } from './ChartFigure.svelte';
export { default as FlowChart } from './FlowChart.svelte';
export { default as PlanChart } from './PlanChart.svelte';
export { default as ResidualChart } from './ResidualChart.svelte';
export { default as TrajectoryChart } from './TrajectoryChart.svelte';
export { paperPalette, screenPalette, type ChartPalette } from './palette';
export { residualWords, type ResidualData } from './residual';
export { trajectoryWords, type TrajectoryData } from './trajectory';
