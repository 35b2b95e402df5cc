import { StatsError } from '../errors.js';
import { fitModel, type ModelFit } from '../fit/fit-model.js';
import { withOutcome } from '../fit/prepare-model.js';
import { searchModel } from '../fit/search-model.js';
import { likelihoodRatioTest } from '../inference/likelihood-ratio.js';
import type { ModelDesign } from '../design/model-design.js';
import { randomStream } from '../numeric/random.js';
import { drawerOf } from './draw.js';
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
	Start,
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

/** The replicate of a world that only says where the others set out. */
const PILOT = 2 ** 31;

export const twoParts = ['level+slope', 'level+serial', 'serial+noise'] as const;
/** The one model of three parts; asked of only where it gains as much over every model of two. */
export const threeParts = 'level+serial+noise';

/** The random streams of a world; they stay what they are whichever worlds there are. */
const numberOf: Record<string, number> = {
	independent: 1,
	level: 2,
	serial: 3,
	'level+slope': 4,
	'level+serial': 5,
	'serial+noise': 6,
	weak: 7,
	'level+serial+noise': 8
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

/** What `work` gives; null where the statistics have no answer. */
function attempt<T>(work: () => T): T | null {
	try {
		return work();
	} catch (error) {
		if (error instanceof StatsError && error.code !== 'stopped') return null;
		throw error;
	}
}

/** Gain of what is best of `rivals` over `held`. */
const gainOf = (found: ReadonlyMap<string, number>, held: string, rivals: readonly string[]) =>
	Math.max(...rivals.map((id) => found.get(id)!)) - found.get(held)!;

/** The likelihood of a model is at least that of those within it, wherever the search for it ended. */
export function noLessThanWithin(
	value: number,
	{ kind, visits, contains }: FamilyMember,
	others: ReadonlyMap<string, number>
): number {
	const within = contains.map((other) => withVisits(other, visits));
	if (visits) within.push(kind, ...contains);
	return within.reduce((best, id) => Math.max(best, others.get(id) ?? best), value);
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
	if (visitsInAll)
		for (const kind of ['independent', ...twoParts, threeParts] as const) add(kind, true);
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
	if (Number.isFinite(best) && bestOfTwo - best > WORTH_TWO_PARTS) {
		const three = at(threeParts);
		const worth = (logs.get(three) ?? -Infinity) - bestOfTwo > WORTH_TWO_PARTS;
		const candidates = worth ? [...two, three] : two;
		for (const kind of worth ? ([...twoParts, threeParts] as const) : twoParts)
			compare(
				`more than ${kind}`,
				at(kind),
				candidates.filter((id) => id !== at(kind))
			);
	}

	const order = [...models.keys()];
	const worlds = [...new Set(comparisons.map((c) => c.under))].map((id): World => {
		const from = id === 'weak' ? level : id;
		const { fit, member } = fits.get(from)!;
		const wanted = new Set(
			comparisons.flatMap((c) => (c.under === id ? [c.held, ...c.rivals] : []))
		);
		// What lies within a model is refitted too, cheaply: it is the likelihood at that model's edges.
		for (const of of [...wanted]) {
			const { kind, visits, contains } = fits.get(of)!.member;
			for (const other of contains) {
				const within = withVisits(other, visits);
				if (logs.has(within)) wanted.add(within);
			}
			if (visits && !member.visits) wanted.add(kind);
		}
		const working = [...fit.working];
		if (id === 'weak')
			working[fit.prepared.layout.subject] = Math.sqrt(WEAK_SHARE / (1 - WEAK_SHARE));
		const number = id === 'weak' ? numberOf.weak! : streamsOf(id);
		const refit = [...wanted].sort((a, b) => order.indexOf(a) - order.indexOf(b));
		const boundary = id === 'weak' ? [] : fit.boundary;
		const y = drawerOf(
			fit.prepared,
			method,
			working
		)(randomStream(seed, number * 2 ** 32 + PILOT).normal);
		const starts = refit.map((to): Start => {
			const pilot = withOutcome(fits.get(to)!.fit.prepared, y);
			const found =
				to === from
					? { x: working, boundary }
					: attempt(() => searchModel(pilot, method, supervision));
			const { x, boundary: edges } = found ?? {
				x: fits.get(to)!.fit.working,
				boundary: fits.get(to)!.fit.boundary
			};
			const start = startOf(pilot, x, edges);
			return { working: [...start], inverse: inverseAt(pilot, method, start) };
		});
		return { id, number, from, working, refit, starts };
	});
	const used = new Set(worlds.flatMap((world) => [world.from, ...world.refit]));
	const members = [...used].map((id): PlannedMember => ({
		member: fits.get(id)!.member,
		logLikelihood: logs.get(id)!
	}));
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
