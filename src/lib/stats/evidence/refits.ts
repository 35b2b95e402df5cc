import { StatsError } from '../errors.js';
import { prepareModel, withOutcome, type PreparedModel } from '../fit/prepare-model.js';
import { searchModel, type SearchOptions } from '../fit/search-model.js';
import { randomStream } from '../numeric/random.js';
import type { Supervision } from '../types.js';
import { drawerOf } from './draw.js';
import type { FamilyMember } from './family.js';
import { noLessThanWithin } from './plan-evidence.js';
import type { EvidencePart, EvidencePlan, Start } from './types.js';

/** The slope at which a refit has converged; what is left of −2 log-likelihood is about its square, 1e-6. */
const TOLERANCE = 1e-3;

interface Refitted {
	logLikelihood: number;
	restarted: boolean;
}

/** Log-likelihood of one model on another outcome; null when the search did not converge, not even begun anew. */
function refit(
	prepared: PreparedModel,
	{ working, inverse }: Start,
	plan: EvidencePlan,
	y: Float64Array,
	supervision: Supervision
): Refitted | null {
	const another = withOutcome(prepared, y);
	const attempt = (options: SearchOptions) => {
		try {
			const found = searchModel(another, plan.method, {
				...options,
				...supervision,
				tolerance: TOLERANCE
			});
			return found.converged ? -found.deviance / 2 : null;
		} catch (error) {
			if (error instanceof StatsError && error.code !== 'stopped') return null;
			throw error;
		}
	};
	// The likelihood at the edges is that of the models within this one, which are refitted before it.
	const near = attempt({
		start: Float64Array.from(working),
		edges: false,
		...(inverse ? { inverse } : {})
	});
	if (near !== null) return { logLikelihood: near, restarted: false };
	const anew = attempt({});
	return anew === null ? null : { logLikelihood: anew, restarted: true };
}

/**
 * Replicates `from` to `to` − 1 of every world of a plan: data drawn under its model, and its models refitted.
 *
 * Replicate k of a world draws from a stream of its own and from nothing else, so any split into ranges, on any number
 * of workers, gives the same bits. A refit starts at the estimates; one that does not converge begins anew at every
 * starting point, and is marked as failed when that does not converge either.
 * Errors: `bad-option`, `stopped`.
 */
export function evidencePart(
	plan: EvidencePlan,
	from: number,
	to: number,
	{ onProgress, shouldStop }: Supervision = {}
): EvidencePart {
	if (!Number.isInteger(from) || !Number.isInteger(to) || from < 0 || to < from || to > plan.refits)
		throw new StatsError(
			'bad-option',
			`Refits are counted from 0 to ${plan.refits}, not from ${from} to ${to}.`
		);
	const supervision = shouldStop ? { shouldStop } : {};
	const refitters = new Map(
		plan.members.map((m): [string, { member: FamilyMember; prepared: PreparedModel }] => [
			m.member.id,
			{ member: m.member, prepared: prepareModel(plan.design, m.member.dependence) }
		])
	);
	const count = to - from;
	const total = count * plan.worlds.reduce((sum, world) => sum + world.refit.length, 0);
	let done = 0;
	const worlds = plan.worlds.map((world) => {
		const draw = drawerOf(refitters.get(world.from)!.prepared, plan.method, world.working);
		const logLikelihood = world.refit.map(() => new Float64Array(count));
		const failed = world.refit.map(() => new Uint8Array(count));
		let restarted = 0;
		for (let k = 0; k < count; k++) {
			const random = randomStream(plan.seed, world.number * 2 ** 32 + from + k);
			const y = draw(random.normal);
			const found = new Map<string, number>();
			world.refit.forEach((id, m) => {
				if (shouldStop?.()) throw new StatsError('stopped', 'The refits were stopped.');
				const { member, prepared } = refitters.get(id)!;
				const value = refit(prepared, world.starts[m]!, plan, y, supervision);
				if (value === null) failed[m]![k] = 1;
				else {
					const { logLikelihood: own } = value;
					logLikelihood[m]![k] = noLessThanWithin(own, member, found);
					found.set(id, logLikelihood[m]![k]!);
					if (value.restarted) restarted++;
				}
				onProgress?.(++done / total);
			});
		}
		return { id: world.id, logLikelihood, failed, restarted };
	});
	return { from, to, worlds };
}

/** Parts that follow on each other, put together in order: the same as one part over all. */
export function joinEvidence(parts: readonly EvidencePart[]): EvidencePart {
	const sorted = [...parts].sort((a, b) => a.from - b.from);
	const first = sorted[0];
	if (!first) throw new StatsError('no-data', 'There are no refits to put together.');
	sorted.forEach((part, i) => {
		if (i > 0 && part.from !== sorted[i - 1]!.to)
			throw new StatsError('shape-mismatch', 'Refits must follow on each other without gaps.');
	});
	const to = sorted.at(-1)!.to;
	const count = to - first.from;
	return {
		from: first.from,
		to,
		worlds: first.worlds.map(({ id, logLikelihood }, w) => {
			const whole = {
				id,
				logLikelihood: logLikelihood.map(() => new Float64Array(count)),
				failed: logLikelihood.map(() => new Uint8Array(count)),
				restarted: 0
			};
			for (const part of sorted) {
				const own = part.worlds[w]!;
				own.logLikelihood.forEach((column, m) => {
					whole.logLikelihood[m]!.set(column, part.from - first.from);
					whole.failed[m]!.set(own.failed[m]!, part.from - first.from);
				});
				whole.restarted += own.restarted;
			}
			return whole;
		})
	};
}
