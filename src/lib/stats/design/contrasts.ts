import { StatsError } from '../errors.js';
import type { BuiltDesign } from './build-model-design.js';
import { finish, obstacle, type Contrast, type Full } from './estimable.js';
import { averageCovariates, meanRow, minus, none, slopeRow } from './mean-rows.js';
import { levelPosition } from './mean-terms.js';
import { toInside } from './own-scale.js';
import type { Occasion } from './time-basis.js';

export type { Contrast } from './estimable.js';

/** At which occasion: a time in the data's unit, or a visit by its label. */
export type When = { time: number } | { visit: string };

const list = (names: readonly string[]) => names.map((name) => `“${name}”`).join(', ');

/**
 * Whether the data determine Σ weight × coefficient; `weights` by name, over the left-out coefficients too.
 * Errors: `unknown-coefficient`, `bad-plan`.
 */
export function isEstimable(
	built: BuiltDesign,
	weights: Readonly<Record<string, number>>
): boolean {
	return obstacle(built.columns, named(built, weights, 'The combination').inside) === null;
}

/** The occasion in numbers; its words. Errors: `bad-option`, `unknown-level`. */
function occasionOf({ design }: BuiltDesign, when: When): Occasion {
	const categorical = design.timeInMean === 'categorical';
	if ('visit' in when) {
		const visit = levelPosition(design.visits, when.visit, 'visit');
		if (categorical) return { time: 0, visit };
		throw new StatsError(
			'bad-option',
			`The mean goes by time and not by visit, so “${when.visit}” has no mean of its own. Give a time.`,
			{ visit: when.visit }
		);
	}
	if (categorical) {
		throw new StatsError(
			'bad-option',
			`The mean goes by visit and not by time, so there is no mean at time ${when.time}. Give one of the visits ${list(design.visits)}.`,
			{ time: when.time }
		);
	}
	if (!Number.isFinite(when.time)) {
		throw new StatsError('bad-option', `The time ${when.time} is not finite.`);
	}
	return { time: when.time, visit: 0 };
}

const inWords = (when: When) => ('visit' in when ? `visit ${when.visit}` : `time ${when.time}`);

/** Position of a group, which may be left out when there is none. Errors: `unknown-level`, `bad-option`. */
function groupOf({ parts }: BuiltDesign, group: string | null): number {
	if (group !== null) return levelPosition(parts.groups, group, 'group');
	if (parts.groups.length === 0) return 0;
	throw new StatsError(
		'bad-option',
		`The model has groups, so one of them must be named: ${list(parts.groups)}.`
	);
}

/** The time of a slope: where the line is not straight it must be said. Errors: `bad-option`. */
function slopeTime({ design }: BuiltDesign, at: number | undefined): number {
	const { timeInMean } = design;
	if (at !== undefined) {
		if (Number.isFinite(at)) return at;
		throw new StatsError('bad-option', `The time ${at} is not finite.`);
	}
	const curved = typeof timeInMean === 'object' && ('knots' in timeInMean || timeInMean.degree > 1);
	if (!curved) return 0;
	throw new StatsError(
		'bad-option',
		'The slope changes with time in this model, so the time at which it is asked for must be given.'
	);
}

/** By how much the mean of a group changes per unit of time, at time `at` where the course is not straight. */
export function slope(built: BuiltDesign, group: string | null = null, at?: number): Contrast {
	const row = slopeRow(built, groupOf(built, group), slopeTime(built, at));
	return finish(built, row, `The slope${group === null ? '' : ` of group “${group}”`}`);
}

/** The slope of `group` less that of `reference`. */
export function slopeDifference(
	built: BuiltDesign,
	group: string,
	reference: string,
	at?: number
): Contrast {
	const time = slopeTime(built, at);
	return finish(
		built,
		minus(
			slopeRow(built, groupOf(built, group), time),
			slopeRow(built, groupOf(built, reference), time)
		),
		`The difference in slopes of “${group}” and “${reference}”`
	);
}

/** The mean of `group` less that of `reference` at an occasion, covariates alike. */
export function differenceAt(
	built: BuiltDesign,
	group: string,
	reference: string,
	when: When
): Contrast {
	const occasion = occasionOf(built, when);
	return finish(
		built,
		minus(
			meanRow(built, occasion, groupOf(built, group), none),
			meanRow(built, occasion, groupOf(built, reference), none)
		),
		`The difference of “${group}” and “${reference}” at ${inWords(when)}`
	);
}

function changeRow(built: BuiltDesign, group: string | null, when: When): Full {
	const g = groupOf(built, group);
	const start: Occasion = { time: 0, visit: 0 };
	return minus(meanRow(built, occasionOf(built, when), g, none), meanRow(built, start, g, none));
}

/** By how much the mean of a group has changed at an occasion since time 0 (since the first visit). */
export function changeFromBaseline(built: BuiltDesign, group: string | null, when: When): Contrast {
	const whose = group === null ? '' : ` of group “${group}”`;
	return finish(
		built,
		changeRow(built, group, when),
		`The change${whose} from baseline to ${inWords(when)}`
	);
}

/** The change from baseline of `group` less that of `reference`. */
export function differenceInChange(
	built: BuiltDesign,
	group: string,
	reference: string,
	when: When
): Contrast {
	return finish(
		built,
		minus(changeRow(built, group, when), changeRow(built, reference, when)),
		`The difference in change of “${group}” and “${reference}” at ${inWords(when)}`
	);
}

/** The mean outcome of a group at an occasion, covariates at their average over subjects. */
export function meanAt(built: BuiltDesign, group: string | null, when: When): Contrast {
	const whose = group === null ? '' : ` of group “${group}”`;
	return finish(
		built,
		meanRow(built, occasionOf(built, when), groupOf(built, group), averageCovariates(built)),
		`The mean${whose} at ${inWords(when)}`
	);
}

/** Errors: `unknown-coefficient`, `bad-plan`. */
function named(
	{ columns }: BuiltDesign,
	weights: Readonly<Record<string, number>>,
	what: string
): Full {
	const own = columns.names.map(() => 0);
	for (const [name, weight] of Object.entries(weights)) {
		const at = columns.names.indexOf(name);
		if (at < 0) {
			throw new StatsError(
				'unknown-coefficient',
				`${what} gives a weight to “${name}”, and the model has no coefficient of that name. It has ${list(columns.names)}.`,
				{ coefficient: name, coefficients: columns.names }
			);
		}
		if (!Number.isFinite(weight)) {
			throw new StatsError(
				'bad-plan',
				`${what} gives “${name}” the weight ${weight}; it must be a finite number.`
			);
		}
		own[at] = weight;
	}
	return { own, inside: toInside(columns.ownScale, own) };
}

/**
 * Σ weight × coefficient by name; coefficients not named have weight 0. `what` names it in sentences.
 *
 * A coefficient that was left out may take part when the data determine the whole.
 * Errors: `unknown-coefficient`, `bad-plan`, `not-estimable`, `bad-option`.
 */
export function combination(
	built: BuiltDesign,
	weights: Readonly<Record<string, number>>,
	what = 'The combination'
): Contrast {
	return finish(built, named(built, weights, what), what);
}

/** The coefficient at position `at` of `design.names`, as a contrast. */
export function coefficientAt({ design, ownScale }: BuiltDesign, at: number): Contrast {
	const weights = design.names.map((_, j) => (j === at ? 1 : 0));
	return { weights, inside: toInside(ownScale, weights) };
}
