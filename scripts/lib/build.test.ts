import { mkdirSync, mkdtempSync, renameSync, rmSync, utimesSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { describe, expect, it } from 'vitest';
import { dependenciesAreThere, stampOf } from './build.mjs';

const newFolder = () => mkdtempSync(join(tmpdir(), 'heddle-build-'));

describe('the stamp of a build', () => {
	const make = () => {
		const base = newFolder();
		mkdirSync(join(base, 'src/deep'), { recursive: true });
		writeFileSync(join(base, 'src/a.ts'), 'one');
		writeFileSync(join(base, 'src/deep/b.ts'), 'two');
		writeFileSync(join(base, 'src/a.test.ts'), 'test');
		return base;
	};
	const stamp = (base: string) =>
		stampOf(base, ['src', 'missing'], (name) => !name.endsWith('.test.ts'));

	it('stays while the content stays, whatever the times say', () => {
		const base = make();
		const before = stamp(base);
		utimesSync(join(base, 'src/a.ts'), 1, 1);
		writeFileSync(join(base, 'src/a.test.ts'), 'another test');
		expect(stamp(base)).toBe(before);
		expect(stamp(make())).toBe(before);
	});

	it('changes with a content, a name, a new file and a missing one', () => {
		const changes: ((base: string) => void)[] = [
			(base) => writeFileSync(join(base, 'src/a.ts'), 'One'),
			(base) => renameSync(join(base, 'src/a.ts'), join(base, 'src/c.ts')),
			(base) => writeFileSync(join(base, 'src/new.ts'), ''),
			(base) => rmSync(join(base, 'src/deep/b.ts')),
			// The border between two files is part of the stamp.
			(base) => {
				writeFileSync(join(base, 'src/a.ts'), 'onet');
				writeFileSync(join(base, 'src/deep/b.ts'), 'wo');
			}
		];
		const all = new Set([stamp(make())]);
		for (const change of changes) {
			const base = make();
			change(base);
			all.add(stamp(base));
		}
		expect(all.size).toBe(changes.length + 1);
	});
});

describe('the installed dependencies', () => {
	const lock = (version: string) =>
		JSON.stringify({
			packages: {
				'': { name: 'x' },
				'node_modules/a': { version },
				'node_modules/only-elsewhere': { version: '1.0.0', optional: true }
			}
		});

	it('are there only when the whole installation ended and agrees with the lock file', () => {
		const base = newFolder();
		writeFileSync(join(base, 'package-lock.json'), lock('1.0.0'));
		expect(dependenciesAreThere(base)).toBe(false);
		mkdirSync(join(base, 'node_modules/a'), { recursive: true });
		expect(dependenciesAreThere(base)).toBe(false);
		writeFileSync(
			join(base, 'node_modules/.package-lock.json'),
			JSON.stringify({ packages: { 'node_modules/a': { version: '1.0.0' } } })
		);
		expect(dependenciesAreThere(base)).toBe(true);
		writeFileSync(join(base, 'package-lock.json'), lock('1.0.1'));
		expect(dependenciesAreThere(base)).toBe(false);
	});
});
