import { unitText, type UnitCode } from '$lib/units/units';
import { numberText } from '$lib/units/convert';
import type { Measure, PlannedVisit, StudyDefinition } from './definition';

const numbers = ['no', 'one', 'two', 'three', 'four', 'five', 'six', 'seven', 'eight'];
const counted = (n: number) => numbers[n] ?? String(n);
const days = (amount: number, unit: string) => `${amount} ${unit}${amount === 1 ? '' : 's'}`;

/** 'two arms, 2 to 1: Treatment A (2), Treatment B (1)' */
export function armsWords(definition: Pick<StudyDefinition, 'arms'>): string {
	if (definition.arms.length < 2)
		return 'One arm: everybody follows the same plan, and nobody is randomised.';
	const { arms } = definition;
	const ratio = arms.map((arm) => arm.ratio).join(' to ');
	const equal = arms.every((arm) => arm.ratio === arms[0]?.ratio);
	const share = equal ? 'in equal parts' : `in the ratio ${ratio}`;
	const names = arms.map((arm) => (equal ? arm.name : `${arm.name} (${arm.ratio})`)).join(', ');
	const count = counted(arms.length);
	return `${count.charAt(0).toUpperCase()}${count.slice(1)} arms, allocated by chance ${share}: ${names}.`;
}

/** What the allocation is kept in balance within. */
export function strataWords(
	definition: Pick<StudyDefinition, 'strata' | 'stratifyBySite'>
): string | null {
	const factors = [
		...definition.strata.map((stratum) => stratum.name),
		...(definition.stratifyBySite ? ['site'] : [])
	];
	return factors.length === 0 ? null : `Kept in balance within: ${factors.join('; ')}.`;
}

/** '3 months after randomisation' */
export function targetWords(
	visit: Pick<PlannedVisit, 'anchor' | 'target'>,
	visits: readonly Pick<PlannedVisit, 'key' | 'name'>[]
): string {
	const from = visit.anchor.startsWith('visit:')
		? (visits.find((each) => each.key === visit.anchor.slice('visit:'.length))?.name ??
			visit.anchor)
		: visit.anchor;
	const { amount, unit } = visit.target;
	if (amount === 0) return `on the day of ${from}`;
	return `${days(Math.abs(amount), unit)} ${amount < 0 ? 'before' : 'after'} ${from}`;
}

/** '14 days before to 14 days after the target' */
export function widthWords(visit: Pick<PlannedVisit, 'before' | 'after'>): string {
	const { before, after } = visit;
	if (before.amount === 0 && after.amount === 0) return 'on that day only';
	if (before.amount === 0) return `up to ${days(after.amount, after.unit)} after`;
	if (after.amount === 0) return `from ${days(before.amount, before.unit)} before`;
	return `from ${days(before.amount, before.unit)} before to ${days(after.amount, after.unit)} after`;
}

const inUnit = (value: number, decimals: number, unit: UnitCode) =>
	`${numberText(value, Math.max(decimals, String(value).split('.')[1]?.length ?? 0))} ${unitText(unit)}`.trim();

function range(
	low: number | undefined,
	high: number | undefined,
	decimals: number,
	unit: UnitCode
) {
	if (low !== undefined && high !== undefined)
		return `${inUnit(low, decimals, '1')} to ${inUnit(high, decimals, unit)}`;
	if (low !== undefined) return `from ${inUnit(low, decimals, unit)}`;
	if (high !== undefined) return `up to ${inUnit(high, decimals, unit)}`;
	return '';
}

/** What a measure is and what is accepted for it, in a few lines. */
export function measureWords(measure: Measure): { kind: string; unit: string; limits: string[] } {
	const unit = 'unit' in measure ? unitText(measure.unit) : '';
	switch (measure.kind) {
		case 'number':
		case 'repeated': {
			const hard = range(measure.hardLow, measure.hardHigh, measure.decimals, measure.unit);
			const soft = [
				measure.softLow !== undefined &&
					`below ${inUnit(measure.softLow, measure.decimals, measure.softHigh === undefined ? measure.unit : '1')}`,
				measure.softHigh !== undefined &&
					`above ${inUnit(measure.softHigh, measure.decimals, measure.unit)}`
			]
				.filter(Boolean)
				.join(' or ');
			const change = measure.softChange;
			return {
				kind:
					measure.kind === 'number'
						? 'number'
						: `${measure.readings} readings, at least ${measure.readingsNeeded}`,
				unit,
				limits: [
					hard && `accepted: ${hard}`,
					soft && `asked about ${soft}`,
					change &&
						`asked about when it changes by more than ${change.size}${change.by === 'percent' ? ' %' : ` ${unit}`} from ${change.from === 'last' ? 'the last visit' : 'baseline'}`
				].filter((line): line is string => Boolean(line))
			};
		}
		case 'choice':
			return {
				kind: 'choice',
				unit,
				limits: [measure.choices.map((choice) => choice.name).join(', ')]
			};
		case 'date':
			return { kind: 'date', unit, limits: measure.future ? [] : ['not in the future'] };
		case 'text':
			return { kind: 'text', unit, limits: [`at most ${measure.maxLength} characters`] };
		case 'derived':
			return { kind: 'worked out from other values', unit, limits: [] };
	}
}

const dayNames = ['Monday', 'Tuesday', 'Wednesday', 'Thursday', 'Friday', 'Saturday', 'Sunday'];

/** 'Monday to Friday 08:00 to 12:30 and 13:15 to 17:00'; days with the same hours together. */
export function openingWords(
	hours: readonly { weekday: number; opens: string; closes: string }[]
): string {
	const spans = dayNames.map((_, at) =>
		hours
			.filter((each) => each.weekday === at + 1)
			.sort((a, b) => a.opens.localeCompare(b.opens))
			.map((each) => `${each.opens} to ${each.closes}`)
			.join(' and ')
	);
	const groups: { from: number; to: number; text: string }[] = [];
	spans.forEach((text, at) => {
		if (text === '') return;
		const last = groups.at(-1);
		if (last && last.text === text && last.to === at - 1) last.to = at;
		else groups.push({ from: at, to: at, text });
	});
	if (groups.length === 0) return 'No opening hours yet.';
	return groups
		.map(({ from, to, text }) =>
			from === to ? `${dayNames[from]} ${text}` : `${dayNames[from]} to ${dayNames[to]} ${text}`
		)
		.join('; ');
}
