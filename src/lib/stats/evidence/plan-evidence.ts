import { StatsError } from '../errors.js';
import { fitModel, type ModelFit } from '../fit/fit-model.js';
import { likelihoodRatioTest } from '../inference/likelihood-ratio.js';
import type { ModelDesign } from '../design/model-design.js';
import { familyKinds, memberOf, withVisits, type FamilyKind, type FamilyMember } from './family.js';
import { inverseAt, startOf } from './restart.js';
import { sizesOf } from './sizes.js';
import type {
	ComparisonName,
	EvidenceOptions,
	EvidencePlan,
	FittedMember,
	PlannedComparison,
	PlannedMember,
	UnfittedMember,
	World
} from './types.js';

/** A gain in log-likelihood that visit effects must bring for every kind to be compared with them; a choice. */
const VISITS_IN_ALL = 2;
/**
 * A gain below which models of two parts cannot win at 1 in 100, so that no data are drawn under them: half
 * chi-squared with one degree of freedom gives it 1 in 20.
 */
const WORTH_TWO_PARTS = 1.35;
/** The share of the variance that a lasting offset holds in the world `weak`; a choice. */
export const WEAK_SHARE = 0.1;

export const twoParts = ['level+slope', 'level+serial', 'serial+noise'] as const;

/** The random streams of a world; they stay what they are whichever worlds there are. */
const numberOf: Record<string, number> = {
	independent: 1,
	level: 2,
	serial: 3,
	'level+slope': 4,
	'level+serial': 5,
	'serial+noise': 6,
	weak: 7
};
const streamsOf = (id: string) => {
	const visits = id.endsWith('+visit');
	return numberOf[visits ? id.slice(0, -'+visit'.length) : id]! + (visits ? 16 : 0);
};

function told(member: FamilyMember, fit: ModelFit, options: EvidenceOptions): FittedMember {
	const { layout } = fit.prepared;
	const shift = options.logLikelihoodShift ?? 0;
	return {
		id: member.id,
		words: member.words,
		fitted: true,
		logLikelihood: fit.logLikelihood + shift,
		parameters: fit.criteria.parameters,
		aic: fit.criteria.aic - 2 * shift,
		bic: {
			rows: fit.criteria.bicRows - 2 * shift,
			subjects: fit.criteria.bicSubjects - 2 * shift
		},
		estimates: fit.parameters.map(({ name, value }) => ({
			name,
			estimate: name === 'range' ? layout.gapUnit * Math.exp(fit.working[layout.range]!) : value
		})),
		boundary: fit.boundary,
		converged: fit.converged,
		effectiveSampleSize: sizesOf(fit, options.contrast?.weights)
	};
}

function readOptions(options: EvidenceOptions, design: ModelDesign) {
	const { refits = 400, seed = 20260101, method = 'reml', along = 'time', contrast } = options;
	if (!Number.isInteger(refits) || refits < 100 || refits > 1e6)
		throw new StatsError(
			'bad-option',
			`The number of refits must be a whole number from 100 to 1,000,000, not ${refits}: with fewer, 1 in 100 cannot be seen.`,
			{ refits }
		);
	if (!Number.isSafeInteger(seed) || seed < 0)
		throw new StatsError('bad-option', `The seed must be a whole number from 0, not ${seed}.`, {
			seed
		});
	if (contrast && contrast.weights.length !== design.p)
		throw new StatsError(
			'shape-mismatch',
			`The contrast “${contrast.name}” has ${contrast.weights.length} weights for ${design.p} columns of the mean.`,
			{ weights: contrast.weights.length, columns: design.p }
		);
	return { refits, seed, method, along };
}

/** Twofold gain of what is best of `rivals` over `held`. */
const gainOf = (found: ReadonlyMap<string, number>, held: string, rivals: readonly string[]) =>
	Math.max(...rivals.map((id) => found.get(id)!)) - found.get(held)!;

/** The likelihood of a model is at least that of those within it, wherever the search for it ended. */
export function noLessThanWithin(
	value: number,
	member: FamilyMember,
	others: ReadonlyMap<string, number>
): number {
	return member.contains.reduce(
		(best, kind) => Math.max(best, others.get(withVisits(kind, member.visits)) ?? best),
		value
	);
}

/**
 * Fits the family to the data and says what is to be drawn and refitted: the first step, on one thread.
 *
 * A model that the design cannot carry is listed with the sentence that says why. Errors: those of independent errors
 * (`constant-outcome`, `perfect-fit`, `rank-deficient` …), `bad-option`, `shape-mismatch`, `stopped`.
 */
export function planEvidence(design: ModelDesign, options: EvidenceOptions = {}): EvidencePlan {
	const { refits, seed, method, along } = readOptions(options, design);
	const supervision = options.shouldStop ? { shouldStop: options.shouldStop } : {};
	const models = new Map<string, FittedMember | UnfittedMember>();
	const fits = new Map<string, { member: FamilyMember; fit: ModelFit }>();
	const logs = new Map<string, number>();
	const add = (kind: FamilyKind, visits: boolean) => {
		const member = memberOf(kind, visits, along);
		const { id, words } = member;
		try {
			const fit = fitModel(design, member.dependence, { method, ...supervision });
			models.set(id, told(member, fit, options));
			fits.set(id, { member, fit });
			logs.set(id, noLessThanWithin(fit.logLikelihood, member, logs));
		} catch (error) {
			if (!(error instanceof StatsError) || error.code === 'stopped') throw error;
			if (id === 'independent') throw error;
			models.set(id, { id, words, fitted: false, reason: error.message });
		}
	};
	for (const kind of familyKinds) add(kind, false);
	add('level', true);
	add('serial', true);
	const gain = (held: string, ...rivals: string[]) => {
		const there = rivals.filter((id) => logs.has(id));
		return logs.has(held) && there.length > 0 ? gainOf(logs, held, there) : 0;
	};
	const visitsInAll =
		Math.max(gain('level', 'level+visit'), gain('serial', 'serial+visit')) > VISITS_IN_ALL;
	if (visitsInAll) for (const kind of ['independent', ...twoParts] as const) add(kind, true);
	const at = (kind: FamilyKind) => withVisits(kind, visitsInAll);

	const comparisons: PlannedComparison[] = [];
	const compare = (
		name: ComparisonName,
		held: string,
		wanted: readonly string[],
		mixed = false,
		under = held,
		tail: PlannedComparison['tail'] = 'at-least'
	) => {
		const rivals = wanted.filter((id) => logs.has(id));
		if (!logs.has(held) || rivals.length === 0) return;
		const [only] = rivals;
		const mixture = mixed ? likelihoodRatioTest(fits.get(held)!.fit, fits.get(only!)!.fit) : null;
		comparisons.push({ name, held, rivals, under, tail, mixture });
	};
	const [none, level, serial] = [at('independent'), at('level'), at('serial')];
	const two = twoParts.map(at);
	compare('any dependence', none, [level, serial]);
	compare('level over independent', none, [level], true);
	compare('serial over independent', none, [serial], along === 'time');
	if (logs.has(level)) compare('weak offset', none, [level, serial], false, 'weak', 'at-most');
	if (logs.has(serial) && logs.has(level)) {
		compare('serial over level', level, [serial]);
		compare('level over serial', serial, [level]);
	}
	compare('more than level', level, two);
	compare('slope beside level', level, [at('level+slope')], true);
	compare('serial beside level', level, [at('level+serial')]);
	compare('more than serial', serial, two);
	compare('level beside serial', serial, [at('level+serial')], true);
	compare('noise beside serial', serial, [at('serial+noise')]);
	compare('visit beside level', 'level', ['level+visit']);
	compare('visit beside serial', 'serial', ['serial+visit']);
	const best = Math.max(...[level, serial].map((id) => logs.get(id) ?? -Infinity));
	const bestOfTwo = Math.max(...two.map((id) => logs.get(id) ?? -Infinity));
	if (Number.isFinite(best) && bestOfTwo - best > WORTH_TWO_PARTS)
		for (const kind of twoParts)
			compare(
				`more than ${kind}`,
				at(kind),
				two.filter((id) => id !== at(kind))
			);

	const needed = new Map<string, Set<string>>();
	for (const { held, rivals, under } of comparisons) {
		const set = needed.get(under) ?? new Set<string>();
		for (const id of [held, ...rivals]) set.add(id);
		needed.set(under, set);
	}
	const order = [...models.keys()];
	const worlds = [...needed].map(([id, set]): World => {
		const from = id === 'weak' ? level : id;
		const { fit } = fits.get(from)!;
		const working = [...fit.working];
		if (id === 'weak')
			working[fit.prepared.layout.subject] = Math.sqrt(WEAK_SHARE / (1 - WEAK_SHARE));
		return {
			id,
			number: id === 'weak' ? numberOf.weak! : streamsOf(id),
			from,
			working,
			// What lies within another is refitted before it.
			refit: [...set].sort((a, b) => order.indexOf(a) - order.indexOf(b))
		};
	});
	const used = new Set(worlds.flatMap((world) => [world.from, ...world.refit]));
	const members = [...used].map((id): PlannedMember => {
		const { member, fit } = fits.get(id)!;
		const start = startOf(fit);
		return {
			member,
			logLikelihood: logs.get(id)!,
			working: fit.working,
			start: [...start],
			inverse: inverseAt(fit, start)
		};
	});
	return {
		design,
		method,
		refits,
		seed,
		contrast: options.contrast?.name ?? null,
		visitsInAll,
		models: [...models.values()],
		members,
		comparisons,
		worlds
	};
}
