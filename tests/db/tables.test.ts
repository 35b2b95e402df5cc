import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import ts from 'typescript';
import { afterAll, beforeAll, expect, test } from 'vitest';
import { root } from '../../scripts/lib/places.mjs';
import { freshDatabase, type FreshDatabase } from '../support/database';

/** The columns of src/lib/server/db/tables.ts, read from its text: table → column → { nullable, generated, kind }. */
interface Column {
	nullable: boolean;
	/** May be left out when inserting. */
	optional: boolean;
	kind: string;
}
type Described = Map<string, Map<string, Column>>;

const path = join(root, 'src/lib/server/db/tables.ts');

function described(): Described {
	const source = ts.createSourceFile(
		path,
		readFileSync(path, 'utf8'),
		ts.ScriptTarget.Latest,
		true
	);
	const interfaces = new Map<string, ts.InterfaceDeclaration>();
	for (const statement of source.statements)
		if (ts.isInterfaceDeclaration(statement)) interfaces.set(statement.name.text, statement);
	const properties = (name: string) =>
		(interfaces.get(name)?.members ?? ([] as unknown as ts.NodeArray<ts.TypeElement>)).filter(
			ts.isPropertySignature
		);
	const nameOf = (property: ts.PropertySignature) =>
		ts.isStringLiteral(property.name) ? property.name.text : property.name.getText(source);
	const column = (type: ts.TypeNode): Column => {
		const text = type.getText(source);
		const parts = ts.isUnionTypeNode(type) ? type.types.map((t) => t.getText(source)) : [text];
		const nullable = parts.includes('null') || /^Generated<[^>]*\| null>$/.test(text);
		const inner = parts.filter((part) => part !== 'null').join(' | ');
		const generated = /^Generated<(.*)>$/s.exec(inner);
		return {
			nullable,
			optional: nullable || generated !== null || inner === 'GeneratedJson',
			kind: (generated?.[1] ?? inner).replace(/ \| null$/, '')
		};
	};
	return new Map(
		properties('Tables').map((table) => {
			const full = nameOf(table).includes('.') ? nameOf(table) : `app.${nameOf(table)}`;
			return [
				full,
				new Map(
					properties(table.type?.getText(source) ?? '').map((p) => [
						nameOf(p),
						column(p.type as ts.TypeNode)
					])
				)
			];
		})
	);
}

/** What the driver gives back for a column of this type, in the words of tables.ts. */
const kinds: Record<string, RegExp> = {
	uuid: /^string$/,
	text: /^(string|'|Role|VisitStatus|JobStatus|MailKind|MailStatus)/,
	'character varying': /^string$/,
	boolean: /^boolean$/,
	integer: /^number$/,
	real: /^number$/,
	numeric: /^Numeric$/,
	bigint: /^(Big|number|string)$/,
	bytea: /^Buffer$/,
	date: /^string$/,
	jsonb: /^(Json|GeneratedJson)$/,
	'timestamp with time zone': /^Timestamp$/,
	xid8: /^string$/,
	ARRAY: /\[\]/
};

let db: FreshDatabase;
beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db?.drop());

test('the types of the tables are those of a freshly migrated database', async () => {
	const [rows] = await db.sql(`
		select c.table_schema || '.' || c.table_name as name, c.column_name, c.data_type,
			c.is_nullable = 'YES' as nullable,
			c.column_default is not null or c.is_identity = 'YES' or c.is_generated = 'ALWAYS' as filled
		from information_schema.columns c
		join information_schema.tables t using (table_schema, table_name)
		where c.table_schema in ('app', 'audit', 'closed') and t.table_type = 'BASE TABLE'
			and c.table_name not like 'kysely_%'
		order by 1, c.ordinal_position`);
	const told = described();
	const wrong: string[] = [];
	const seen = new Set<string>();
	for (const { name, column_name, data_type, nullable, filled } of rows ?? []) {
		seen.add(`${name}.${column_name}`);
		const column = told.get(name)?.get(column_name);
		if (!told.has(name)) wrong.push(`${name} is not described`);
		else if (!column) wrong.push(`${name}.${column_name} is not described`);
		else {
			if (column.nullable !== nullable)
				wrong.push(`${name}.${column_name}: nullable is ${nullable} in the database`);
			if (column.optional && !nullable && !filled)
				wrong.push(`${name}.${column_name}: has no default, but may be left out`);
			if (!column.optional && filled)
				wrong.push(`${name}.${column_name}: has a default, but must be given`);
			if (!kinds[data_type]?.test(column.kind))
				wrong.push(`${name}.${column_name}: ${data_type} is described as ${column.kind}`);
		}
	}
	for (const [name, columns] of told)
		for (const column of columns.keys())
			if (!seen.has(`${name}.${column}`)) wrong.push(`${name}.${column} is not in the database`);
	expect([...new Set(wrong)]).toEqual([]);
	expect(told.size).toBeGreaterThan(30);
});
