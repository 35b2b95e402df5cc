import { StatsError } from '../errors.js';
import type { DegreesOfFreedom, GrowthOptions, Method } from '../types.js';

export interface SettledOptions extends GrowthOptions {
	method: Method;
	randomIntercept: boolean;
	degreesOfFreedom: DegreesOfFreedom;
	confidence: number;
}

/** The options with every default filled in. Errors: `bad-option`, `kenward-roger-needs-reml`. */
export function settle(options: GrowthOptions): SettledOptions {
	const method = options.method ?? 'REML';
	const settled = {
		...options,
		method,
		randomIntercept: options.randomIntercept ?? true,
		degreesOfFreedom:
			options.degreesOfFreedom ?? (method === 'REML' ? 'kenward-roger' : 'satterthwaite'),
		confidence: options.confidence ?? 0.95
	};
	if (!(settled.confidence > 0 && settled.confidence < 1)) {
		throw new StatsError(
			'bad-option',
			`The confidence of the intervals is ${settled.confidence}; it must lie between 0 and 1.`
		);
	}
	for (const time of [...(options.differenceTimes ?? []), ...(options.lineTimes ?? [])]) {
		if (!Number.isFinite(time)) {
			throw new StatsError('bad-option', `The time ${time} is not finite.`);
		}
	}
	if (settled.degreesOfFreedom === 'kenward-roger' && method !== 'REML') {
		throw new StatsError(
			'kenward-roger-needs-reml',
			'Kenward–Roger degrees of freedom are defined for REML only. Fit by REML, or use Satterthwaite.'
		);
	}
	return settled;
}
