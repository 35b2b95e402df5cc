import type { CovariateSpec, GrowthOptions, GrowthRow, GrowthSpec } from '$lib/stats';
import { daysBetween, plainDateOf } from '../../time/dates';
import { convert, converts } from '../../units/convert';
import { isUnit } from '../../units/units';
import type { CutContent, CutSubject, CutVisit } from '../cut/content';
import { characteristicIn, type LookSpec } from './look.input';

/** What the statistics are handed for one look. Pure: one cut and one model give one input. */
export interface LookRows {
	rows: GrowthRow[];
	spec: GrowthSpec;
	options: Pick<GrowthOptions, 'method' | 'randomIntercept' | 'degreesOfFreedom'>;
	/** Whole sentences about what could not be placed in time or in a group. */
	leftOut: string[];
}

/** A question that the cut cannot be asked; the sentence is for the person who asked. */
export class Unanswerable extends Error {}

/** Mean lengths of the Gregorian calendar (365.2425 days a year is the exact mean; 365.25 is common practice). */
const daysIn = { day: 1, week: 7, month: 365.25 / 12, year: 365.25 } as const;

const people = (n: number, what: string) =>
	n === 1
		? `1 subject ${what} and is not in the analysis.`
		: `${n} subjects ${what} and are not in the analysis.`;

/** Whether the model can use the row: nothing that it needs is missing. */
const isUsable = ({ outcome, group, covariates = {} }: GrowthRow): boolean =>
	outcome !== null && group !== null && Object.values(covariates).every((value) => value !== null);

type Allocation = ReadonlyMap<string, string>;

class Maker {
	private unplaced = 0;
	private unanchored = 0;
	private unallocated = 0;
	private readonly content: CutContent;
	private readonly spec: LookSpec;
	private readonly arms: Allocation | null;
	private readonly measure: CutContent['measures'][number];

	constructor(content: CutContent, spec: LookSpec, arms: Allocation | null) {
		this.content = content;
		this.spec = spec;
		this.arms = arms;
		const measure = content.measures.find(({ key }) => key === spec.measure);
		if (!measure) throw new Unanswerable('This measure is not in the cut.');
		if (measure.kind !== 'number' && measure.kind !== 'repeated' && measure.kind !== 'derived')
			throw new Unanswerable(`“${measure.name}” is not a number.`);
		this.measure = measure;
		if (spec.group === 'arms' && arms === null)
			throw new Unanswerable('Arms are compared by the independent statistician alone.');
	}

	make(): LookRows {
		const rows: GrowthRow[] = [];
		for (const subject of this.content.subjects) rows.push(...this.ofSubject(subject));
		return {
			rows,
			spec: {
				...(this.spec.group === 'none' ? {} : { group: { levels: this.levels(rows) } }),
				covariates: this.covariateSpecs(rows)
			},
			options: {
				method: this.spec.method,
				randomIntercept: this.spec.ownLevel === 'yes',
				degreesOfFreedom: this.spec.df
			},
			leftOut: [
				...(this.unanchored > 0
					? [
							people(
								this.unanchored,
								`without a day of ${this.content.anchor} cannot be placed in time`
							)
						]
					: []),
				...(this.unallocated > 0
					? [people(this.unallocated, 'without an allocation cannot be placed in an arm')]
					: []),
				...(this.unplaced > 0
					? [
							`${this.unplaced} visit${this.unplaced === 1 ? '' : 's'} without ${this.spec.timeUnit === 'as given' ? 'a study time' : 'a day'} ${this.unplaced === 1 ? 'is' : 'are'} not in the analysis.`
						]
					: [])
			]
		};
	}

	private ofSubject(subject: CutSubject): GrowthRow[] {
		const measured = subject.visits.filter((visit) => visit.values[this.spec.measure]);
		if (measured.length === 0) return [];
		const anchor =
			this.content.anchor === 'randomisation' ? subject.randomisedOn : subject.enrolledOn;
		if (this.spec.timeUnit !== 'as given' && anchor === null) {
			this.unanchored++;
			return [];
		}
		const group = this.groupOf(subject);
		if (this.spec.group === 'arms' && group === null) {
			this.unallocated++;
			return [];
		}
		const covariates = this.covariatesOf(subject);
		const rows: GrowthRow[] = [];
		for (const visit of measured) {
			// Used on the right-hand side, the baseline is no outcome.
			if ('baseline' in covariates && visit.key === this.content.baselineVisit) continue;
			const time = this.timeOf(visit, anchor);
			if (time === null) {
				this.unplaced++;
				continue;
			}
			rows.push({
				subject: subject.number,
				time,
				outcome: this.valueOf(visit),
				...(this.spec.group === 'none' ? {} : { group }),
				...(Object.keys(covariates).length > 0 ? { covariates } : {})
			});
		}
		return rows;
	}

	private timeOf(visit: CutVisit, anchor: string | null): number | null {
		if (this.spec.timeUnit === 'as given') return visit.studyTime;
		if (visit.happenedOn === null || anchor === null) return null;
		return (
			daysBetween(plainDateOf(anchor), plainDateOf(visit.happenedOn)) / daysIn[this.spec.timeUnit]
		);
	}

	/** In the measure's own unit, whichever it was entered in under an earlier version of the protocol. */
	private valueOf(visit: CutVisit): number | null {
		const held = visit.values[this.spec.measure];
		if (!held || held.value === null) return null;
		const { unit } = this.measure;
		if (unit === null || held.unit === unit) return held.value;
		if (!isUnit(held.unit) || !converts(held.unit, unit))
			throw new Unanswerable(
				`Some values of “${this.measure.name}” are in ${held.unit}, which does not convert to ${unit}.`
			);
		return convert(held.value, held.unit, unit);
	}

	private groupOf(subject: CutSubject): string | null {
		if (this.spec.group === 'arms') return this.arms?.get(subject.id) ?? null;
		const key = characteristicIn(this.spec.group);
		return key === null ? null : this.choiceOf(subject, key);
	}

	private choiceOf(subject: CutSubject, key: string): string | null {
		const trait = this.content.characteristics.find((each) => each.key === key);
		if (trait?.kind !== 'choice')
			throw new Unanswerable('Groups are made by a characteristic with choices.');
		const held = subject.characteristics[key];
		if (held === null || held === undefined) return null;
		return trait.choices.find((choice) => choice.key === held)?.name ?? String(held);
	}

	private covariatesOf(subject: CutSubject): Record<string, number | string | null> {
		const values: Record<string, number | string | null> = {};
		for (const slot of this.spec.covariates) {
			const key = characteristicIn(slot);
			if (slot === 'site')
				values.site =
					this.content.sites.find(({ code }) => code === subject.site)?.name ?? subject.site;
			else if (slot === 'baseline') {
				const baseline = subject.visits.find(
					({ key: visit }) => visit === this.content.baselineVisit
				);
				values.baseline = baseline ? this.valueOf(baseline) : null;
			} else if (key !== null) {
				const trait = this.content.characteristics.find((each) => each.key === key);
				if (!trait || trait.kind === 'birth-date')
					throw new Unanswerable('This characteristic cannot be adjusted for.');
				const held = subject.characteristics[key];
				values[key] =
					trait.kind === 'choice'
						? this.choiceOf(subject, key)
						: typeof held === 'number'
							? held
							: null;
			}
		}
		return values;
	}

	/** Levels that occur, in the order in which the study lists them; the first is what others are compared with. */
	private found(key: string | null, seen: Iterable<string | null | undefined>): string[] {
		const there = new Set([...seen].filter((each): each is string => typeof each === 'string'));
		const trait = this.content.characteristics.find((each) => each.key === key);
		const order = trait?.kind === 'choice' ? trait.choices.map(({ name }) => name) : [];
		return [
			...order.filter((name) => there.has(name)),
			...[...there].filter((name) => !order.includes(name)).sort()
		];
	}

	private levels(rows: readonly GrowthRow[]): string[] {
		return this.found(
			characteristicIn(this.spec.group),
			rows.filter(isUsable).map(({ group }) => group)
		);
	}

	private covariateSpecs(rows: readonly GrowthRow[]): CovariateSpec[] {
		const used = rows.filter(isUsable);
		return this.spec.covariates.flatMap((slot): CovariateSpec[] => {
			if (slot === '') return [];
			if (slot === 'baseline') return [{ name: 'baseline', kind: 'numeric' }];
			const key = slot === 'site' ? 'site' : (characteristicIn(slot) as string);
			const trait = this.content.characteristics.find((each) => each.key === key);
			if (slot !== 'site' && trait?.kind === 'number') return [{ name: key, kind: 'numeric' }];
			const seen = used.map(({ covariates }) => covariates?.[key] as string | null | undefined);
			return [
				{ name: key, kind: 'categorical', levels: this.found(slot === 'site' ? null : key, seen) }
			];
		});
	}
}

/**
 * The rows of a look. `arms` gives each allocated subject its letter; without it arms cannot be compared. A subject's
 * label is its number; nothing else about the person goes into the fit. Throws `Unanswerable`.
 */
export const rowsFromCut = (
	content: CutContent,
	spec: LookSpec,
	arms: Allocation | null = null
): LookRows => new Maker(content, spec, arms).make();
