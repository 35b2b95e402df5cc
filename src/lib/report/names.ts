import type { Coefficient, NamedContrast } from '$lib/stats/types';
import { significant } from './format';
import { ReportFault, type LookReportInput } from './input';

/** A number that was chosen, not estimated (a time, a level): as many digits as it has, six at most. */
export const chosen = (value: number): string => {
	const trimmed = String(Number(value.toPrecision(6)));
	return /e/.test(trimmed) ? significant(value, 6) : trimmed.replace('-', '−');
};

/** How the groups and terms of a result are called in this report. */
export interface Names {
	/** Display names in drawing order; empty without groups. */
	groups: string[];
	group: (level: string) => string;
	/** Position of a level in `groups`; 0 without groups. */
	position: (level: string | null) => number;
	at: (time: number) => string;
	perTime: string;
	coefficient: (c: Coefficient) => { label: string; unit: string };
	contrast: (c: NamedContrast) => { label: string; unit: string };
}

function groupNames(input: LookReportInput): Map<string, string> {
	const levels = input.result.model.groupLevels;
	const group = input.group;
	if (group?.kind !== 'arm') return new Map(levels.map((l) => [l, l]));
	const letters = levels.map((level) => group.letters?.[level] ?? level);
	if (letters.some((l) => !/^[A-Z]$/.test(l)) || new Set(letters).size !== letters.length) {
		// The level itself is not in the message: it would carry an arm's name into a log.
		throw new ReportFault('ARM_WITHOUT_LETTER', 'each arm needs one letter of its own');
	}
	return new Map(levels.map((level, i) => [level, `Arm ${letters[i]}`]));
}

export function names(input: LookReportInput): Names {
	const { result, measure, time } = input;
	const shown = groupNames(input);
	// Letters stand in the order of the alphabet, whatever the order of the arms behind them.
	const groups = [...shown.values()];
	if (input.group?.kind === 'arm') groups.sort();

	const group = (level: string) => {
		const name = shown.get(level);
		if (name === undefined) throw new Error('a group of the result is not among its levels');
		return name;
	};
	// A last observed time has as many digits as a division gives; four tell which visit it was.
	const at = (t: number) => `${time.name} ${chosen(Number(t.toPrecision(4)))} ${time.unit}`.trim();
	const perTime = `${measure.unit} per ${time.one}`.trim();
	const reference = result.model.groupLevels[0];
	const ofReference = reference === undefined ? '' : `, ${group(reference)}`;
	const level = (name: string, prefix: string) =>
		name.startsWith(`${prefix}[`) && name.endsWith(']') ? name.slice(prefix.length + 1, -1) : null;
	const minus = (a: string, b: string | null | undefined) =>
		b === null || b === undefined ? group(a) : `${group(a)} minus ${group(b)}`;

	return {
		groups,
		group,
		position: (l) => (l === null ? 0 : Math.max(0, groups.indexOf(group(l)))),
		at,
		perTime,
		coefficient: ({ name }) => {
			if (name === 'intercept') {
				const rest = result.model.covariates.length > 0 ? ', covariates at zero or reference' : '';
				return { label: `Level at ${at(0)}${ofReference}${rest}`, unit: measure.unit };
			}
			if (name === 'time') {
				const whose = result.model.groupByTime ? ofReference : '';
				return { label: `Change per ${time.one}${whose}`, unit: perTime };
			}
			const covariate = result.model.covariates.find(
				(c) => name === c.name || level(name, c.name) !== null
			);
			if (covariate) {
				const known = input.covariates?.[covariate.name];
				const label = known?.label ?? covariate.name;
				const its = level(name, covariate.name);
				if (its !== null) {
					return {
						label: `${label}: ${its} minus ${covariate.levels[0] ?? ''}`,
						unit: measure.unit
					};
				}
				const per = known?.unit ? `${measure.unit} per ${known.unit}` : `${measure.unit} per unit`;
				return { label: `For one more of ${label}`, unit: per };
			}
			const slope = level(name, 'time:group');
			if (slope !== null) {
				return {
					label: `Difference in change per ${time.one}, ${minus(slope, reference)}`,
					unit: perTime
				};
			}
			const offset = level(name, 'group');
			if (offset !== null) {
				const when = result.model.groupByTime ? ` at ${at(0)}` : '';
				return {
					label: `Difference in level${when}, ${minus(offset, reference)}`,
					unit: measure.unit
				};
			}
			throw new Error('a coefficient of the result has a name this report does not know');
		},
		contrast: (c) => {
			switch (c.kind) {
				case 'slope':
					return {
						label: `Change per ${time.one}${c.group === null ? '' : `, ${group(c.group)}`}`,
						unit: perTime
					};
				case 'slope-difference':
					return {
						label: `Difference in change per ${time.one}, ${minus(c.group!, c.reference)}`,
						unit: perTime
					};
				case 'difference-at-time':
					return {
						label: `Difference at ${at(c.time!)}, ${minus(c.group!, c.reference)}`,
						unit: measure.unit
					};
			}
		}
	};
}
