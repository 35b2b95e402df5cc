import { describe, expect, test } from 'vitest';
import { fingerprintNow } from '../cut/fingerprint.server';
import { eligibilitySheet } from '../subject/eligibility-sheet';
import {
	brokenBy,
	differencesOf,
	meanings,
	meaningsOf,
	mustGive,
	readSheet,
	recordKinds,
	sheetText,
	standingOf,
	type LaterChange,
	type Sheet
} from './signature';
import { boxValue, signForm, signFromForm, signInput } from './signature.input';

const id = '01900000-0000-7000-8000-00000000abcd';
const facts = {
	id,
	study: 'AMR-01',
	site: '02',
	number: 7,
	screenedOn: '2026-03-02',
	protocolVersion: 1,
	answeredAt: '2026-03-02T09:30:00.000Z',
	criteria: [
		{ key: 'adult', kind: 'inclusion' as const, text: 'Is 18 or older.' },
		{ key: 'pregnant', kind: 'exclusion' as const, text: 'Is pregnant.' }
	],
	answers: { adult: 'yes', pregnant: 'no' } as const
};
const sheet = eligibilitySheet(facts);

describe('what is signed', () => {
	test('is each criterion with its answer, and whether it is met', () => {
		expect(sheet.lines.map(({ label, value }) => `${label} ${value}`)).toEqual([
			'Study AMR-01',
			'Site 02',
			'Screened on 2 Mar 2026',
			'Protocol version 1',
			'Answered at 2 Mar 2026, 09:30:00.000 UTC',
			'Inclusion: Is 18 or older. yes: met',
			'Exclusion: Is pregnant. no: met'
		]);
		expect(
			eligibilitySheet({ ...facts, answers: { pregnant: 'yes' } }).lines.map(({ value }) => value)
		).toEqual([
			'AMR-01',
			'02',
			'2 Mar 2026',
			'1',
			'2 Mar 2026, 09:30:00.000 UTC',
			'not answered',
			'yes: not met'
		]);
	});

	test('has one text, whatever the order of its keys, and comes back from it whole', () => {
		const { form, record, title, lines } = sheet;
		const turned = { lines, title, record: { id: record.id, kind: record.kind }, form } as Sheet;
		expect(sheetText(turned)).toBe(sheetText(sheet));
		expect(readSheet(sheetText(sheet))).toEqual(sheet);
	});

	test.each([
		'',
		'{}',
		'no JSON',
		'[]',
		'{"form":2}',
		sheetText(sheet).replace('"form":1', '"form":2')
	])('is nothing that can be read in %j', (text) => {
		expect(readSheet(text)).toBeNull();
	});
});

describe('whether it stands', () => {
	const text = sheetText(sheet);
	const kept = {
		record: 'eligibility',
		recordId: id,
		content: text,
		sha256: fingerprintNow(text),
		tied: true
	};
	const other = sheetText(eligibilitySheet({ ...facts, answers: { adult: 'no', pregnant: 'no' } }));

	test('follows from the record as it is now', () => {
		expect(standingOf(kept, fingerprintNow, text)).toBe('stands');
		expect(standingOf(kept, fingerprintNow, other)).toBe('broken');
		expect(standingOf(kept, fingerprintNow, null)).toBe('broken');
	});

	test('is damaged when the kept row is not what was signed, whatever the record says', () => {
		for (const wrong of [
			{ content: other },
			{ sha256: fingerprintNow(other) },
			{ content: other, sha256: fingerprintNow(other), recordId: 'another' },
			{ recordId: 'another' },
			{ record: 'visit' },
			{ tied: false },
			{ content: 'x', sha256: fingerprintNow('x') }
		])
			expect(standingOf({ ...kept, ...wrong }, fingerprintNow, text)).toBe('damaged');
	});
});

describe('what changed since', () => {
	test('is told line by line: another answer, a line less, a line more, other words', () => {
		const now = eligibilitySheet({
			...facts,
			criteria: [
				{ key: 'adult', kind: 'inclusion', text: 'Is 21 or older.' },
				{ key: 'consents', kind: 'inclusion', text: 'Consents.' }
			],
			answers: { adult: 'yes' }
		});
		expect(differencesOf(sheet, now)).toEqual([
			{ label: 'Inclusion: Is 18 or older.', before: 'yes: met', after: null },
			{ label: 'Inclusion: Is 21 or older.', before: null, after: 'yes: met' },
			{ label: 'Exclusion: Is pregnant.', before: 'no: met', after: null },
			{ label: 'Inclusion: Consents.', before: null, after: 'not answered' }
		]);
		expect(differencesOf(sheet, sheet)).toEqual([]);
		expect(differencesOf(sheet, null)).toHaveLength(sheet.lines.length);
	});

	const change = (day: number, before: string, after: string): LaterChange => ({
		at: new Date(Date.UTC(2026, 2, day)),
		by: `Person ${day}`,
		before,
		after
	});
	test('names the change since which the record has not said again what was signed', () => {
		expect(brokenBy([])).toBeNull();
		expect(brokenBy([change(1, 'a', 'b')])?.by).toBe('Person 1');
		expect(brokenBy([change(1, 'a', 'b'), change(2, 'b', 'c')])?.by).toBe('Person 1');
		expect(brokenBy([change(1, 'a', 'b'), change(2, 'b', 'a')])).toBeNull();
		expect(brokenBy([change(1, 'a', 'b'), change(2, 'b', 'a'), change(3, 'a', 'c')])?.by).toBe(
			'Person 3'
		);
	});
});

test('a break asks for the address again', () => {
	expect(mustGive(null)).toBe('address and password');
	expect(mustGive(new Date())).toBe('password');
});

test('every kind of record has meanings, and every meaning is a whole sentence', () => {
	for (const kind of recordKinds) expect(meaningsOf[kind].length).toBeGreaterThan(0);
	for (const sentence of Object.values(meanings)) expect(sentence).toMatch(/^I .*\.$/);
});

describe('the form', () => {
	const item = {
		record: 'eligibility' as const,
		recordId: id,
		meaning: 'eligibility' as const,
		sha256: 'a'.repeat(64)
	};
	test('says the same as the API', () => {
		const form = signForm.parse({ items: [boxValue(item)], email: '', password: 'p' });
		expect(signFromForm(form)).toEqual({ items: [item], email: '', password: 'p' });
		expect(signInput.parse({ items: [item], password: 'p' }).items).toEqual([item]);
	});

	test.each([
		[[]],
		[['']],
		[['eligibility']],
		[[boxValue({ ...item, sha256: 'a' })]],
		[[boxValue({ ...item, recordId: 'x' })]],
		[[boxValue(item).replace('eligibility|', 'visit|')]]
	])('refuses %j', (items) => {
		expect(signForm.safeParse({ items, password: 'p' }).success).toBe(false);
	});
});
