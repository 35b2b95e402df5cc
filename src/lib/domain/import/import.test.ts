import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import { importMapping, readNumber, suggestMapping, type ImportMappingInput } from './mapping';
import { checkRows } from './rows';
import { importLimits, readTable, readTableText, type Table } from './table';

function tableOf(text: string): Table {
	const read = readTableText(text);
	if (!read.ok) throw new Error(JSON.stringify(read.problems));
	return read.table;
}

/** 'row column CODE' of each problem. */
const list = (
	problems: { row: number | null; column: string | null; problem: { code: string } }[]
) => problems.map((each) => `${each.row ?? '-'} ${each.column ?? '-'} ${each.problem.code}`);

const refusals = (text: string) => {
	const read = readTableText(text);
	return read.ok ? [] : list(read.problems);
};

const base: ImportMappingInput = {
	subject: 'subject',
	time: { kind: 'number', column: 'time', unit: 'year' },
	measures: [{ column: 'y', name: 'Distance', unit: 'mm', decimals: 1 }]
};

const check = (text: string, change: Partial<ImportMappingInput> = {}, masked = false) =>
	checkRows(tableOf(text), importMapping.parse({ ...base, ...change }), { masked });

const problemsOf = (text: string, change: Partial<ImportMappingInput> = {}, masked = false) =>
	list(check(text, change, masked).problems);

describe('reading a file', () => {
	const expected = [
		{ row: 2, cells: ['S1', '0', '1.5'] },
		{ row: 3, cells: ['S2', '1', 'a, "b"\nc'] }
	];

	it.each([
		['commas', ','],
		['semicolons', ';'],
		['tabs', '\t'],
		['bars', '|']
	])('with %s', (_, sign) => {
		const text = `subject,time,y\nS1,0,1.5\n`.replaceAll(',', sign);
		expect(tableOf(text)).toMatchObject({
			header: ['subject', 'time', 'y'],
			rows: expected.slice(0, 1),
			delimiter: sign
		});
	});

	it('with a byte order mark, quotes, and any line ends', () => {
		const text = '\uFEFFsubject,time,y\r\nS1,0,1.5\r\n"S2",1,"a, ""b""\nc"\r\n';
		expect(tableOf(text)).toMatchObject({ header: ['subject', 'time', 'y'], rows: expected });
	});

	it('counts rows as a spreadsheet does, blank lines included', () => {
		expect(tableOf('\nsubject,time,y\n\nS1,0,1\n\n\nS2,0,2\n').rows.map((row) => row.row)).toEqual([
			4, 7
		]);
	});

	it('in pieces, cut anywhere, even inside a character', async () => {
		const bytes = new TextEncoder().encode('subject,time,y\nMüller 🧵,0,1\n');
		for (const size of [1, 3, 7]) {
			const pieces = Array.from({ length: Math.ceil(bytes.length / size) }, (_, at) =>
				bytes.slice(at * size, (at + 1) * size)
			);
			expect(await readTable(pieces)).toMatchObject({
				ok: true,
				table: { rows: [{ cells: ['Müller 🧵', '0', '1'] }] }
			});
		}
	});

	it('refuses what is not UTF-8', async () => {
		const latin1 = new Uint8Array([0x61, 0x2c, 0x62, 0x0a, 0xfc, 0x2c, 0x31, 0x0a]);
		expect(await readTable([latin1])).toMatchObject({
			ok: false,
			problems: [{ problem: { code: 'IMPORT_ENCODING' } }]
		});
	});

	it('refuses what is too large, too long or too wide, and stops reading', async () => {
		let given = 0;
		async function* endless() {
			for (;;) {
				given += 1;
				yield 'x'.repeat(1024 * 1024);
			}
		}
		expect(await readTable(endless())).toMatchObject({
			problems: [{ problem: { code: 'IMPORT_TOO_LARGE' } }]
		});
		expect(given).toBe(51);
		expect(refusals('a\n'.repeat(importLimits.rows + 2))).toEqual(['- - IMPORT_TOO_MANY_ROWS']);
		expect(tableOf('a\n'.repeat(importLimits.rows + 1)).rows).toHaveLength(importLimits.rows);
		const wide = Array.from({ length: 201 }, (_, at) => `c${at}`).join(',');
		expect(refusals(`${wide}\n`)).toEqual(['- - IMPORT_TOO_MANY_COLUMNS']);
	});

	it.each([
		['', ['- - IMPORT_EMPTY']],
		['subject,time,y\n', ['- - IMPORT_EMPTY']],
		['a,,c\n1,2,3\n', ['1 - HEADER_BLANK']],
		['a,a\n1,2\n', ['1 a HEADER_TWICE']],
		['a,b\n1,2,3\n4\n', ['2 - ROW_LENGTH', '3 - ROW_LENGTH']],
		['a,b\n1,"2\n', ['2 - QUOTES']],
		['a,b\n1,"2"x\n', ['2 - QUOTES']]
	])('refuses %j', (text, problems) => {
		expect(refusals(text)).toEqual(expect.arrayContaining(problems));
	});
});

describe('numbers in a file', () => {
	it.each<[string, number, number]>([
		['249.5600', 249.56, 2],
		['-7.55749424732008e-01', -0.755749424732008, 15],
		['1e3', 1000, 0],
		['1.5E2', 150, 0],
		['.5', 0.5, 1],
		['−2', -2, 0],
		['7.', 7, 0]
	])('%s', (text, value, decimals) => {
		expect(readNumber(text, '.')).toEqual({ value, decimals });
	});

	it.each(['', '.', '-', 'e5', '1,5', '1 5', '0x1', 'NaN', 'Infinity', '1e', '1e5.5', '1..2'])(
		'%j is none',
		(text) => {
			expect(readNumber(text, '.')).toBeNull();
		}
	);

	it('may have a decimal comma, and then no point', () => {
		expect(readNumber('12,5', ',')).toEqual({ value: 12.5, decimals: 1 });
		expect(readNumber('1.234,5', ',')).toBeNull();
		expect(readNumber('1.5', ',')).toBeNull();
	});
});

describe('suggesting a mapping', () => {
	it('for the growth data of Potthoff and Roy (1964)', () => {
		expect(
			suggestMapping(tableOf('subject,visit,time,arm,y\nM01,1,0,0,26.0\nM01,2,2,0,25.5\n'))
		).toMatchObject({
			subject: 'subject',
			visit: 'visit',
			time: { kind: 'number', column: 'time', unit: 'day' },
			allocation: 'arm',
			measures: [{ column: 'y', name: 'y', decimals: 1 }],
			rest: []
		});
	});

	it('for dates, characteristics and decimal commas', () => {
		expect(
			suggestMapping(
				tableOf('ID;Visit date;Sex;Height;Note\n1;2026-01-05;f;101,5;x\n1;2026-07-05;f;104,25;y\n')
			)
		).toMatchObject({
			subject: 'ID',
			time: { kind: 'date', column: 'Visit date', anchor: { kind: 'first-date' } },
			characteristic: { column: 'Sex' },
			decimalSign: ',',
			measures: [{ column: 'Height', decimals: 2 }],
			rest: ['Note']
		});
	});

	it('guesses units of time from the name', () => {
		for (const [name, unit] of [
			['age', 'year'],
			['weeks', 'week'],
			['time_months', 'month'],
			['days', 'day']
		])
			expect(suggestMapping(tableOf(`id,${name},y\n1,2,3\n`)).time).toMatchObject({
				column: name,
				unit
			});
	});
});

describe('checking rows', () => {
	it('turns good rows into subjects and rows', () => {
		const result = check('subject,sex,time,y\nM01,m,0,26.0\nM01,m,2,\nF01,f,0,21\n', {
			characteristic: { column: 'sex', name: 'Sex' }
		});
		expect(result).toMatchObject({
			problemCount: 0,
			valueCount: 2,
			missingCount: 1,
			timeUnit: 'year'
		});
		expect(result.subjects).toMatchObject([
			{ subject: 'M01', row: 2, characteristic: 'm' },
			{ subject: 'F01', row: 4, characteristic: 'f' }
		]);
		expect(result.rows).toEqual([
			{ row: 2, subject: 'M01', time: 0, date: null, visit: null, values: [26], covariates: [] },
			{ row: 3, subject: 'M01', time: 2, date: null, visit: null, values: [null], covariates: [] },
			{ row: 4, subject: 'F01', time: 0, date: null, visit: null, values: [21], covariates: [] }
		]);
	});

	it.each([
		['S1,0,abc', '2 y CELL_NOT_A_NUMBER'],
		['S1,0,NA', '2 y CELL_NOT_A_NUMBER'],
		['S1,0,NaN', '2 y CELL_NOT_FINITE'],
		['S1,0,-Infinity', '2 y CELL_NOT_FINITE'],
		['S1,0,1e999', '2 y CELL_TOO_LARGE'],
		['S1,0,1e13', '2 y CELL_TOO_LARGE'],
		['S1,0,1.25', '2 y TOO_MANY_DECIMALS'],
		['S1,0,\u0000', '2 y CELL_NUL'],
		['S1,0,🙂', '2 y CELL_NOT_A_NUMBER'],
		['S1,,1', '2 time TIME_EMPTY'],
		['S1,x,1', '2 time CELL_NOT_A_NUMBER'],
		[',0,1', '2 subject SUBJECT_EMPTY'],
		['   ,0,1', '2 subject SUBJECT_EMPTY'],
		['S\u00001,0,1', '2 subject CELL_NUL'],
		[`${'S'.repeat(65)},0,1`, '2 subject CELL_TOO_LONG'],
		[`S1,0,${'1'.repeat(501)}`, '2 y CELL_TOO_LONG'],
		['S1,0,1\nS1,0.0,2', '3 time ROW_TWICE']
	])('%j: %s', (rows, expected) => {
		expect(problemsOf(`subject,time,y\n${rows}\n`)).toEqual([expected]);
	});

	it('messages name the row and the cell’s text, cut short', () => {
		const found = check(`subject,time,y\nS1,0,1\nS1,0,2\nS2,0,${'z'.repeat(300)}\n`).problems;
		expect(found[0]?.problem.message).toBe('S1 already has a row for this time: row 2.');
		expect(found[1]?.problem.message.length).toBeLessThan(150);
	});

	it('the same time twice is fine at two visits', () => {
		const text = 'subject,visit,time,y\nS1,a,0,1\nS1,b,0,2\nS1,b,0,3\n';
		expect(problemsOf(text, { visit: 'visit' })).toEqual(['4 time ROW_TWICE']);
	});

	it('what belongs to a subject stays the same', () => {
		const text = 'subject,sex,w,time,y\nS1,f,3,0,1\nS1,m,3,1,1\nS1,f,4,2,1\nS1,,3,3,1\n';
		const change: Partial<ImportMappingInput> = {
			characteristic: { column: 'sex', name: 'Sex' },
			covariates: [{ column: 'w', name: 'Birth weight', kind: 'number' }]
		};
		expect(problemsOf(text, change)).toEqual([
			'3 sex CHARACTERISTIC_CHANGES',
			'4 w CHARACTERISTIC_CHANGES',
			'5 sex CHARACTERISTIC_CHANGES'
		]);
		const varies = check(text, {
			covariates: [{ column: 'w', name: 'Wind', kind: 'number', varies: true }]
		});
		expect(varies.rows.map((row) => row.covariates)).toEqual([[3], [3], [4], [3]]);
	});

	it('dates become days from each subject’s first, or from another column', () => {
		const text = 'subject,start,time,y\nS1,2026-01-01,2026-03-01,1\nS1,2026-01-01,2026-02-01,1\n';
		const first = check(text, {
			time: { kind: 'date', column: 'time', anchor: { kind: 'first-date' } }
		});
		expect(first.rows.map((row) => row.time)).toEqual([28, 0]);
		expect(first.subjects[0]?.anchor).toBe('2026-02-01');
		const anchored = check(text, {
			time: { kind: 'date', column: 'time', anchor: { kind: 'column', column: 'start' } }
		});
		expect(anchored.rows.map((row) => row.time)).toEqual([59, 31]);
		expect(anchored.timeUnit).toBe('day');
	});

	it('dates that do not exist or are written otherwise', () => {
		const time = { kind: 'date', column: 'time', anchor: { kind: 'first-date' } } as const;
		expect(problemsOf('subject,time,y\nS1,2026-02-30,1\nS1,3/4/2026,1\nS1,,1\n', { time })).toEqual(
			['2 time DATE_NOT_REAL', '3 time DATE_SHAPE', '4 time TIME_EMPTY']
		);
	});

	it('words for a missing outcome are taken when they are named', () => {
		const result = check('subject,time,y\nS1,0,NA\nS1,1,.\nS1,2,3\n', { missing: ['NA', '.'] });
		expect(result).toMatchObject({ problemCount: 0, missingCount: 2, valueCount: 1 });
	});

	it('the mapping itself is checked first', () => {
		const text = 'subject,time,y\nS1,0,1\n';
		expect(problemsOf(text, { subject: 'who' })).toEqual(['1 who COLUMN_UNKNOWN']);
		expect(problemsOf(text, { visit: 'time' })).toEqual(['1 time COLUMN_TWICE']);
		expect(problemsOf(text, { measures: [] })).toEqual(['- - MEASURES_MISSING']);
		expect(
			problemsOf(text, { covariates: [{ column: 'time', name: 'distance', kind: 'number' }] })
		).toEqual(['1 time COLUMN_TWICE', '1 y NAME_TWICE']);
	});

	it('an allocation stays out of a masked study, also under another heading', () => {
		const text = 'subject,arm,time,y\nS1,0,0,1\n';
		const [found] = check(text, { allocation: 'arm' }, true).problems;
		expect(found?.problem.code).toBe('ALLOCATION_IN_MASKED_STUDY');
		expect(found?.problem.message).toContain('the independent statistician loads it');
		expect(problemsOf(text, { characteristic: { column: 'arm', name: 'Sex' } }, true)).toEqual([
			'1 arm LOOKS_LIKE_ALLOCATION'
		]);
		expect(check(text, { allocation: 'arm' }, true).rows).toEqual([]);
		expect(check(text, { allocation: 'arm' }).subjects[0]?.allocation).toBe('0');
		expect(
			problemsOf(
				'subject,army,time,y\nS1,0,0,1\n',
				{ characteristic: { column: 'army', name: 'Army' } },
				true
			)
		).toEqual([]);
	});

	it('lists the first thousand problems and counts them all', () => {
		const rows = Array.from({ length: 3000 }, (_, at) => `S${at},0,x`).join('\n');
		const result = check(`subject,time,y\n${rows}\n`);
		expect(result.problems).toHaveLength(1000);
		expect(result.problemCount).toBe(3000);
		expect(result.problems.at(-1)?.row).toBe(1001);
	});

	it('takes fifty thousand rows whole', () => {
		const rows = Array.from(
			{ length: 50_000 },
			(_, at) => `S${at >> 3},${at & 7},${at % 1000}.5`
		).join('\n');
		const result = check(`subject,time,y\n${rows}\n`);
		expect(result).toMatchObject({ problemCount: 0, valueCount: 50_000 });
		expect(result.subjects).toHaveLength(6250);
	});

	it('never throws, and takes a row or says why not', () => {
		fc.assert(
			fc.property(
				fc.array(fc.tuple(fc.string(), fc.string(), fc.string()), { maxLength: 20 }),
				(cells) => {
					const table: Table = {
						header: ['subject', 'time', 'y'],
						rows: cells.map((each, at) => ({ row: at + 2, cells: each })),
						delimiter: ','
					};
					const result = checkRows(table, importMapping.parse(base), { masked: false });
					const faulty = new Set(result.problems.map((each) => each.row));
					for (const row of table.rows)
						expect(result.rows.some((each) => each.row === row.row)).toBe(!faulty.has(row.row));
				}
			)
		);
	});
});
