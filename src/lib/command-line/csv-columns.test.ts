import { describe, expect, test } from 'vitest';
import { BadInput } from './bad-input';
import { csvColumns, type ColumnKind } from './csv-columns';

const wanted = new Map<string, ColumnKind>([
	['id', 'label'],
	['y', 'number']
]);

describe('columns of a CSV file', () => {
	test('are numbers or labels as asked, empty and NA being missing', () => {
		expect(csvColumns('id,t,y\n001,0,1.5\n001,1,\n2, x ,NA\r\n3,,-2e-3\n', wanted)).toEqual({
			id: ['001', '001', '2', '3'],
			y: [1.5, null, null, -0.002]
		});
	});

	test('a mark of byte order, quotes with commas and line ends, and blank lines are read through', () => {
		expect(csvColumns('\uFEFF"id",y\n"a, b",1\n\n"say ""yes""\nthere",2\n', wanted)).toEqual({
			id: ['a, b', 'say "yes"\nthere'],
			y: [1, 2]
		});
	});

	test('a header alone gives empty columns', () => {
		expect(csvColumns('id,y\n', wanted)).toEqual({ id: [], y: [] });
	});

	test.each([
		['', /file of data is empty/],
		['id,t\n1,2\n', /needs a column “y”.*It has “id”, “t”/],
		['id,y,y\n1,2,3\n', /names the column “y” twice/],
		['id,y\n1,2\n3\n', /Line 3 has 1 cell and the first line names 2 columns/],
		['id,y\n1,2,3\n', /Line 2 has 3 cells/],
		['id,y\n"a\nb",1\n3,x\n', /Line 4: “x” in the column “y” is not a number/],
		['id,y\n1,NaN\n', /Line 2: “NaN”/],
		['id,y\n1,Infinity\n', /Line 2: “Infinity”/],
		['id,y\n1,"1,5"\n', /Line 2: “1,5”/],
		['id,y\n1,0x1F\n', /Line 2: “0x1F”/],
		['id,y\n"1,2\n3,4\n', /quotation mark/]
	])('refuses %j', (csv, sentence) => {
		expect(() => csvColumns(csv, wanted)).toThrow(BadInput);
		expect(() => csvColumns(csv, wanted)).toThrow(sentence);
	});
});
