import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import { root } from '../../scripts/lib/places.mjs';
import type { ExpectedFit, ExpectedValues } from '../../src/lib/stats/reference/load';

/** The published data sets and what other programs make of them; src/lib/stats/reference/README.md says where they come from. */
const reference = (file: string) =>
	readFileSync(join(root, 'src/lib/stats/reference', file), 'utf8');

export const expectedFit = (set: 'orthodont' | 'sleepstudy'): ExpectedFit =>
	(JSON.parse(reference(`${set}.json`)) as ExpectedValues).fits['M1.REML'];

/** Potthoff and Roy’s growth data with the group in words: arm 1 is girl, 0 is boy. */
export const orthodontCsv = (): string =>
	[
		'subject,visit,time,sex,distance',
		...reference('orthodont.csv')
			.trim()
			.split('\n')
			.slice(1)
			.map((line) => {
				const [subject, visit, time, arm, y] = line.split(',');
				return [subject, visit, time, arm === '1' ? 'girl' : 'boy', y].join(',');
			})
	].join('\n') + '\n';

export const sleepCsv = (): string => reference('sleepstudy.csv');
