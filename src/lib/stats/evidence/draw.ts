import { summariseAt } from '../fit/fit-model.js';
import type { PreparedModel } from '../fit/prepare-model.js';
import { outcomeDrawer } from '../fit/subject-view.js';
import type { FitMethod } from '../plan.js';

/** Draws outcomes under a model at given working parameters; see `outcomeDrawer`. */
export function drawerOf(prepared: PreparedModel, method: FitMethod, working: readonly number[]) {
	const state = { converged: true, gradient: 0, evaluations: 0, boundary: [] };
	return outcomeDrawer(summariseAt(prepared, method, Float64Array.from(working), state));
}
