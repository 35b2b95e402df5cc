import { describe, expect, it } from 'vitest';
import { importRequest, mappingForm, requestFrom, type MappingForm } from './import.input';
import { isUtf8, readHead } from './head';
import { keyFor } from './protocol';
import { plainCell } from '../cut/cut.export';

const columns = ['id', 'when', 'sex', 'age', 'y'];
const form = (change: Partial<MappingForm> = {}): MappingForm =>
	mappingForm.parse({
		version: 1,
		role: ['subject', 'time', 'choice', 'number', 'measure'],
		name: ['', '', 'Sex', 'Age', 'Height'],
		unit: ['1', '1', '1', '1', 'cm'],
		decimals: ['0', '0', '0', '0', '1'],
		timeUnit: 'year',
		site: '01',
		...change
	});

describe('what the mapping page says', () => {
	it('is what the API would say', () => {
		const made = requestFrom(columns, form({ missing: ' NA  . ' }));
		expect(made).toEqual({
			ok: true,
			request: {
				subject: 'id',
				time: { kind: 'number', column: 'when', unit: 'year' },
				covariates: [
					{ column: 'sex', name: 'Sex', kind: 'choice' },
					{ column: 'age', name: 'Age', kind: 'number' }
				],
				measures: [{ column: 'y', name: 'Height', unit: 'cm', decimals: 1 }],
				decimalSign: '.',
				missing: ['NA', '.'],
				site: { kind: 'site', code: '01' }
			}
		});
		expect(importRequest.safeParse(made.ok && made.request).success).toBe(true);
	});

	it.each<[MappingForm['role'], RegExp]>([
		[['subject', 'subject', 'choice', 'number', 'measure'], /Two columns/],
		[['leave out', 'time', 'choice', 'number', 'measure'], /subject/],
		[['subject', 'leave out', 'choice', 'number', 'measure'], /time/],
		[['subject', 'time', 'date', 'number', 'measure'], /either/],
		[['subject', 'time', 'anchor date', 'number', 'measure'], /only where visits have dates/]
	])('%j is not enough', (role, why) => {
		const made = requestFrom(columns, form({ role }));
		expect(made.ok ? '' : made.why).toMatch(why);
	});

	it('takes dates with a column to count from, and sites from a column', () => {
		expect(
			requestFrom(columns, form({ role: ['subject', 'date', 'anchor date', 'site', 'measure'] }))
		).toMatchObject({
			request: {
				time: { kind: 'date', column: 'when', anchor: { kind: 'column', column: 'sex' } },
				site: { kind: 'column', column: 'age' }
			}
		});
	});
});

describe('a file’s head', () => {
	it('is read from a large file without its cut-off last row', () => {
		const text = `a,b\n${'ü,"x, y"\n'.repeat(40_000)}`;
		const head = readHead(Buffer.from(text));
		expect(head.ok && head.table.header).toEqual(['a', 'b']);
		expect(head.ok && head.table.rows.every(({ cells }) => cells[1] === 'x, y')).toBe(true);
	});

	it('shows rows also where some are faulty', () => {
		const head = readHead(Buffer.from('a,b\n1,2,3\n4,5\n'));
		expect(head.ok && head.table.rows.map(({ cells }) => cells)).toEqual([
			['1', '2', '3'],
			['4', '5']
		]);
	});

	it('knows UTF-8, also where a character lies across two pieces', () => {
		const text = Buffer.from(`${'a'.repeat(1024 * 1024 - 1)}ü`);
		expect(isUtf8(text)).toBe(true);
		expect(isUtf8(text.subarray(0, -1))).toBe(false);
		expect(isUtf8(Buffer.from([0xfc, 0x2c]))).toBe(false);
	});
});

describe('keys', () => {
	it('are made of what people call something, and never twice the same', () => {
		const taken = new Set<string>();
		expect(
			['Height (cm)', 'height cm', '12', 'Größe', '---', 'x'.repeat(60)].map((text) =>
				keyFor(text, 'measure', taken)
			)
		).toEqual(['height-cm', 'height-cm-2', 'measure-12', 'gro-e', 'measure', 'x'.repeat(34)]);
	});
});

describe('cells of an export', () => {
	it.each([
		['=1+1', "'=1+1"],
		['+49 170', "'+49 170"],
		['-5', '-5'],
		['-5.25e-3', '-5.25e-3'],
		['-SUM(A1)', "'-SUM(A1)"],
		['@x', "'@x"],
		['\tx', "'\tx"],
		['plain', 'plain']
	])('%j is written %j', (text, written) => {
		expect(plainCell(text)).toBe(written);
	});
});
