import { expect, test } from 'vitest';
import { readTableText } from '$lib/domain/import/table';
import { plainDateOf, isoWeekday } from '$lib/time/dates';
import { aldermere, aldermereFailures, trueEgfr } from './aldermere';
import { larkfieldFile } from './larkfield';

const today = plainDateOf('2026-06-09');

test('the same day tells the same story, another day moves it', () => {
	expect(aldermere(today)).toEqual(aldermere(today));
	expect(larkfieldFile(today)).toBe(larkfieldFile(today));
	expect(aldermere(plainDateOf('2026-06-10'))[0]?.enrolsOn).not.toBe(aldermere(today)[0]?.enrolsOn);
});

test('240 adults enrol on working days before today, in order, with misses, late visits and leavings', () => {
	const people = aldermere(today);
	expect(people).toHaveLength(240);
	expect(people.every((p) => p.enrolsOn < today && isoWeekday(p.enrolsOn) <= 5)).toBe(true);
	expect(people.map((p) => p.enrolsOn)).toEqual(people.map((p) => p.enrolsOn).sort());
	const fates = people.flatMap((p) => p.visits.map((v) => v.fate));
	for (const fate of ['missed', 'late', 'early'] as const) expect(fates).toContain(fate);
	expect(people.some((p) => p.leaves)).toBe(true);
	expect(aldermereFailures(today).every((f) => f.on < today)).toBe(true);
});

test('the second arm loses less', () => {
	const [subject] = aldermere(today);
	if (!subject) throw new Error('nobody');
	expect(trueEgfr(subject, true, 365.25, 0)).toBeGreaterThan(trueEgfr(subject, false, 365.25, 0));
});

test('the cohort is a file that the import reads', () => {
	const read = readTableText(larkfieldFile(today));
	expect(read.ok && read.table.rows.length).toBeGreaterThan(700);
});
