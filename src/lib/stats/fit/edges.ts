import { isSerial } from '../dependence/layout.js';
import type { PreparedModel } from './prepare-model.js';

/** A component that may be absent: what setting it so means for the working parameters. */
export interface Edge {
	name: string;
	/** Coordinates it fixes, and at what. */
	fix: [number, number][];
	/** Whether the point is near enough to the edge for it to be worth a look. */
	near: (x: Float64Array) => boolean;
}

const SMALL = 0.15;

/** The edges of the parameter space of a model: variances at zero, correlations that vanish or never fade. */
export function edgesOf({ layout }: PreparedModel): Edge[] {
	const { dependence } = layout;
	const edges: Edge[] = [];
	const at = layout.subject;
	const zero = (name: string, coordinates: number[]) =>
		edges.push({
			name,
			fix: coordinates.map((i) => [i, 0]),
			near: (x) => coordinates.every((i) => Math.abs(x[i]!) < SMALL)
		});
	switch (dependence.subjectEffects) {
		case 'level':
			zero('subject level', [at]);
			break;
		case 'slope':
			zero('subject slope', [at]);
			break;
		case 'level-and-slope-uncorrelated':
			zero('subject level', [at]);
			zero('subject slope', [at + 1]);
			break;
		case 'level-and-slope':
			zero('subject slope', [at + 1, at + 2]);
			zero('subject level', [at, at + 1]);
			zero('level–slope correlation', [at + 2]);
	}
	if (layout.visit >= 0) zero('visit', [layout.visit]);
	if (isSerial(dependence)) {
		const share = layout.share;
		if (dependence.errors.along === 'time') {
			const vanishing = Math.log(layout.smallestGap / layout.gapUnit / 40);
			edges.push({
				name: 'range',
				fix:
					share >= 0
						? [
								[layout.range, vanishing],
								[share, 0]
							]
						: [[layout.range, vanishing]],
				near: (x) => layout.smallestGap / (layout.gapUnit * Math.exp(x[layout.range]!)) > 3
			});
		}
		if (share >= 0) {
			edges.push({
				name: 'noise',
				fix: [[share, 0]],
				near: (x) => Math.sin(x[share]!) ** 2 < 0.02
			});
			edges.push({
				name: 'serial',
				fix: [
					[share, Math.PI / 2],
					[layout.range, 0]
				],
				near: (x) => Math.cos(x[share]!) ** 2 < 0.02
			});
		}
	}
	return edges;
}
