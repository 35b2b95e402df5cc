import { readFileSync, readdirSync } from 'node:fs';
import { join, relative } from 'node:path';
import { expect, test } from 'vitest';

const root = join(import.meta.dirname, '../../src/lib');

const files = readdirSync(root, { recursive: true, encoding: 'utf8' })
	.filter((file) => /\.(ts|svelte)$/.test(file) && !file.includes('.test.'))
	.map((file) => file.replaceAll('\\', '/'));

/** What a file imports, as a path below src/lib; packages and the framework's own modules are left out. Types may cross. */
function importsOf(file: string): string[] {
	const text = readFileSync(join(root, file), 'utf8').replace(/import type [^;]+;/g, '');
	return [...text.matchAll(/(?:from|import)\s*\(?\s*'([^']+)'/g)]
		.map((match) => match[1] as string)
		.flatMap((name) => {
			if (name.startsWith('$lib/')) return [name.slice('$lib/'.length)];
			if (name.startsWith('.'))
				return [relative(root, join(root, file, '..', name)).replaceAll('\\', '/')];
			return [];
		});
}

const offending = (from: (file: string) => boolean, to: (name: string) => boolean) =>
	files.filter(from).flatMap((file) =>
		importsOf(file)
			.filter(to)
			.map((name) => `${file} → ${name}`)
	);

test('the statistics import nothing of the rest', () => {
	expect(
		offending(
			(file) => file.startsWith('stats/'),
			(name) => !name.startsWith('stats')
		)
	).toEqual([]);
});

test('rules, units and time reach neither the server nor a component', () => {
	const isRule = (file: string) =>
		/^(domain|units|time|report)\//.test(file) &&
		!file.includes('.server.') &&
		!file.endsWith('.svelte');
	expect(
		offending(isRule, (name) => name.startsWith('server') || name.startsWith('components/ui'))
	).toEqual([]);
	expect(offending(isRule, (name) => name.includes('.server'))).toEqual([]);
});

test('only the door, sign-in and the queue touch the pool', () => {
	const allowed =
		/^server\/(change|auth\/(session|actor|throttle)|jobs\/(queue|stop|handlers.*)|db\/.*)\.ts$|^demo\/.*\.server\.ts$/;
	expect(
		offending(
			(file) => !allowed.test(file),
			(name) => /^server\/db\/db$/.test(name)
		)
	).toEqual([]);
});

test('pages never import a command of another page, and components know no server', () => {
	expect(
		offending(
			(file) => file.startsWith('components/'),
			(name) => name.startsWith('server') || name.includes('.server')
		)
	).toEqual([]);
});
