import type { PlainDate } from '../../time/dates';
import { problem } from '../problems';
import { openTo, type StudyDefinition } from '../study/definition';
import { mostSubjectsPerSite } from '../subject/number';
import type { ImportRequest } from './import.input';
import { definitionFromFile, occasionsOf, tellApart, traitsOf } from './protocol';
import type { CheckedRows, ImportedRow } from './rows';
import type { ImportProblem } from './table';

/** What the study holds before the import. */
export interface StudyNow {
	/** The newest published definition; without one, the draft that the file's protocol is built on. */
	definition: StudyDefinition;
	published: boolean;
	sites: { id: string; code: string; name: string; subjects: number }[];
	/** Subjects that came from a file before, by their name there. */
	imported: ReadonlyMap<
		string,
		{
			id: string;
			siteId: string;
			characteristics: Readonly<Record<string, unknown>>;
			/** Times and dates at which they have visits. */
			times: ReadonlySet<string>;
			plannedKeys: ReadonlySet<string>;
		}
	>;
}

export interface PlannedSubject {
	name: string;
	/** Null: to be made. */
	id: string | null;
	siteId: string;
	enrolledOn: PlainDate | null;
	characteristics: Record<string, string | number>;
	visits: PlannedOccasion[];
}

export interface PlannedOccasion {
	/** Key of a planned visit; null where the study plans none of that name. */
	key: string | null;
	name: string;
	position: number;
	happenedOn: PlainDate | null;
	studyTime: number | null;
	/** In the order of the mapping's measures. */
	values: (number | null)[];
}

export interface ImportPlan {
	problems: ImportProblem[];
	problemCount: number;
	/** The protocol version to publish; null where the study has one. */
	definition: StudyDefinition | null;
	/** Keys of the study's measures, in the order of the mapping's. */
	measureKeys: string[];
	/** What rows that share a visit are told apart by. */
	visits: string[];
	subjects: PlannedSubject[];
}

/** What a visit's time is called where two visits are compared. */
export const timeKey = (row: { time: number; date: string | null }): string =>
	row.date ?? String(row.time);

const same = (a: string, b: string) => a.toLowerCase() === b.toLowerCase();

class Planner {
	private readonly problems: ImportProblem[];
	private count: number;
	private readonly sites = new Map<string, StudyNow['sites'][number]>();

	constructor(
		private readonly request: ImportRequest,
		private readonly checked: CheckedRows,
		private readonly study: StudyNow,
		private readonly most: number
	) {
		this.problems = [...checked.problems];
		this.count = checked.problemCount;
		for (const site of study.sites) {
			this.sites.set(site.code, site);
			this.sites.set(site.name.toLowerCase(), site);
		}
	}

	private add(row: number | null, column: string | null, reason: ImportProblem['problem']): void {
		this.count++;
		if (this.problems.length < this.most) this.problems.push({ row, column, problem: reason });
	}

	plan(): ImportPlan {
		const { request, checked, study } = this;
		const made = study.published ? null : definitionFromFile(study.definition, request, checked);
		for (const found of made?.problems ?? []) this.add(found.row, found.column, found.problem);
		const definition = made?.definition ?? study.definition;
		const measureKeys = made
			? definition.measures.map(({ key }) => key)
			: this.matchMeasures(definition);
		if (!made && request.time.kind === 'number' && request.time.unit !== definition.timeUnit)
			this.add(
				null,
				request.time.column,
				problem('TIME_UNIT_DIFFERS', { unit: definition.timeUnit })
			);
		const occasions = occasionsOf(checked, tellApart(request, checked));
		const subjects = this.subjects(definition);
		this.place(definition, subjects);
		this.countNumbers(subjects);
		return {
			problems: this.problems.sort((a, b) => (a.row ?? 0) - (b.row ?? 0)),
			problemCount: this.count,
			definition: made?.definition ?? null,
			measureKeys,
			visits: occasions.map(({ name }) => name),
			subjects: [...subjects.values()]
		};
	}

	private matchMeasures(definition: StudyDefinition): string[] {
		const hidden = openTo(definition);
		return this.request.measures.map((wanted) => {
			const found = definition.measures.find(
				(measure) => same(measure.name, wanted.name) || measure.key === wanted.name
			);
			if (!found || found.kind !== 'number')
				this.add(null, wanted.column, problem('MEASURE_UNKNOWN', { measure: wanted.name }));
			else if (hidden.has(found.key))
				this.add(null, wanted.column, problem('MEASURE_HIDDEN', { measure: found.name }));
			else if (found.unit !== wanted.unit || found.decimals < wanted.decimals)
				this.add(
					null,
					wanted.column,
					problem('MEASURE_DIFFERS', {
						name: found.name,
						unit: found.unit,
						decimals: found.decimals
					})
				);
			return found?.key ?? '';
		});
	}

	private siteOf(subject: CheckedRows['subjects'][number], at: number): string {
		const { site } = this.request;
		const sites = this.study.sites.map(({ code }) => code).join(', ');
		const text =
			site.kind === 'site' ? site.code : String(this.checked.subjects[at]?.covariates.at(-1) ?? '');
		const found = this.sites.get(/^\d$/.test(text) ? `0${text}` : text.toLowerCase());
		if (found) return found.id;
		const column = site.kind === 'column' ? site.column : null;
		this.add(
			column === null ? null : subject.row,
			column,
			text === ''
				? problem('SITE_EMPTY')
				: problem('SITE_UNKNOWN', { text: text.slice(0, 40), sites })
		);
		return '';
	}

	private subjects(definition: StudyDefinition): Map<string, PlannedSubject> {
		const traits = traitsOf(this.request, this.checked).map((trait) => {
			const known = definition.characteristics.find(
				(each) => same(each.name, trait.name) || each.key === trait.name
			);
			if (!known || known.kind !== trait.kind)
				this.add(
					null,
					trait.column,
					problem('CHARACTERISTIC_UNKNOWN', { characteristic: trait.name })
				);
			return { ...trait, known };
		});
		const subjects = new Map<string, PlannedSubject>();
		this.checked.subjects.forEach((subject, at) => {
			const before = this.study.imported.get(subject.subject);
			const characteristics: Record<string, string | number> = {};
			for (const { known, column, name, values } of traits) {
				const value = values[at] ?? null;
				if (!known || value === null) continue;
				let kept: string | number = value;
				if (known.kind === 'choice') {
					const choice = known.choices.find(
						(each) => same(each.name, String(value)) || each.key === value
					);
					if (!choice) {
						// With a protocol of the file's own, too many levels have been told once already.
						if (this.study.published)
							this.add(
								subject.row,
								column,
								problem('LEVEL_UNKNOWN', { text: String(value), name })
							);
						continue;
					}
					kept = choice.key;
				}
				characteristics[known.key] = kept;
				if (before && before.characteristics[known.key] !== kept)
					this.add(
						subject.row,
						column,
						problem('SUBJECT_DIFFERS', { subject: subject.subject, name })
					);
			}
			const siteId = this.siteOf(subject, at);
			if (before && siteId !== '' && before.siteId !== siteId)
				this.add(
					subject.row,
					this.request.subject,
					problem('SUBJECT_DIFFERS', { subject: subject.subject, name: 'site' })
				);
			subjects.set(subject.subject, {
				name: subject.subject,
				id: before?.id ?? null,
				siteId,
				enrolledOn: subject.anchor,
				characteristics,
				visits: []
			});
		});
		return subjects;
	}

	/** Puts each row at its visit. A planned visit takes place once; what the study does not plan stands beside it. */
	private place(definition: StudyDefinition, subjects: Map<string, PlannedSubject>): void {
		const apart = tellApart(this.request, this.checked);
		const planned = new Map(
			occasionsOf(this.checked, apart).map((occasion) => [
				occasion.match,
				{
					name: occasion.name.slice(0, 120),
					at: definition.visits.findIndex(
						(visit) => same(visit.name, occasion.name) || visit.key === occasion.key
					)
				}
			])
		);
		const taken = new Map<string, number>();
		for (const row of this.checked.rows) {
			const subject = subjects.get(row.subject);
			if (!subject) continue;
			const before = this.study.imported.get(row.subject);
			if (before?.times.has(timeKey(row)))
				this.add(
					row.row,
					this.request.time.column,
					problem('IMPORTED_BEFORE', { subject: row.subject })
				);
			const match = apart.matchOf(row);
			const found = planned.get(match);
			const visit = found && found.at >= 0 ? definition.visits[found.at] : undefined;
			if (visit) this.checkOnce(row, visit, taken, before?.plannedKeys);
			subject.visits.push({
				key: visit?.key ?? null,
				name: found?.name ?? 'Unscheduled',
				position: found && found.at >= 0 ? found.at + 1 : definition.visits.length + 1,
				happenedOn: row.date,
				studyTime: row.date === null ? row.time : null,
				values: row.values
			});
		}
	}

	private checkOnce(
		row: ImportedRow,
		visit: StudyDefinition['visits'][number],
		taken: Map<string, number>,
		before: ReadonlySet<string> | undefined
	): void {
		const key = `${row.subject}\n${visit.key}`;
		const first = taken.get(key);
		if (first === undefined && !before?.has(visit.key)) taken.set(key, row.row);
		else if (first !== undefined)
			this.add(
				row.row,
				this.request.visit ?? this.request.time.column,
				problem('VISIT_TWICE', { subject: row.subject, visit: visit.name, first })
			);
		else
			this.add(
				row.row,
				this.request.visit ?? this.request.time.column,
				problem('IMPORTED_BEFORE', { subject: row.subject })
			);
	}

	private countNumbers(subjects: Map<string, PlannedSubject>): void {
		for (const site of this.study.sites) {
			const count = [...subjects.values()].filter(
				({ id, siteId }) => id === null && siteId === site.id
			).length;
			if (site.subjects + count > mostSubjectsPerSite)
				this.add(null, this.request.subject, problem('SITE_FULL', { site: site.code, count }));
		}
	}
}

/** What an import would write, or every reason why it may not. Pure; nothing is written where there is a problem. */
export const planImport = (
	request: ImportRequest,
	checked: CheckedRows,
	study: StudyNow,
	mostProblems: number
): ImportPlan => new Planner(request, checked, study, mostProblems).plan();
