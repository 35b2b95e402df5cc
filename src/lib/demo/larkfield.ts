import { addDays, addMonths, type PlainDate } from '$lib/time/dates';
import { chance } from './chance';

/**
 * The invented cohort, as the file of an existing study: children measured each half-year, with an effect of each visit that
 * everybody shares (a new measuring board, a changed time of day).
 */
const visits = 6;

/** Comma-separated text with a header: child, sex, visit, age, height_cm, weight_kg; some occasions are missing. */
export function larkfieldFile(today: PlainDate, children = 180, seed = 4_071): string {
	const draw = chance(seed);
	const shared = Array.from({ length: visits }, () => draw.normal(0, 0.55));
	const lines = ['child,sex,visit,date,height_cm,weight_kg'];
	for (let child = 1; child <= children; child++) {
		const girl = draw.happens(0.5);
		const age = 4.5 + draw.next() * 5;
		const level = draw.normal(0, 4.2);
		const pace = draw.normal(girl ? 5.7 : 5.9, 0.6);
		const first = addDays(today, -draw.whole(940, 1000));
		const left = draw.happens(0.1) ? draw.whole(2, visits - 1) : visits;
		for (let visit = 0; visit < left; visit++) {
			if (visit > 0 && draw.happens(0.06)) continue;
			const on = addDays(addMonths(first, 6 * visit), Math.round(draw.normal(0, 7)));
			const years = visit / 2;
			const height =
				81 + 6.1 * age + level + pace * years + (shared[visit] ?? 0) + draw.normal(0, 0.35);
			const weight = 0.0016 * height ** 2 * 0.98 + draw.normal(0, 1);
			const name = visit === 0 ? 'Baseline' : `Month ${6 * visit}`;
			lines.push(
				[
					`LF${String(child).padStart(3, '0')}`,
					girl ? 'girl' : 'boy',
					name,
					on,
					height.toFixed(1),
					draw.happens(0.02) ? '' : weight.toFixed(1)
				].join(',')
			);
		}
	}
	return `${lines.join('\n')}\n`;
}
