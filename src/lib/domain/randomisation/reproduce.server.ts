import { z } from 'zod';
import { listFrom, minimisationFrom } from './allocation.server';
import { isSeed } from './generator.server';
import { listMethod } from './list.server';
import { minimisationMethod, minimisedArm } from './minimisation.server';
import { stratumKey } from './strata';

/** The list as the closed side keeps it. */
export const keptList = z.object({
	seed: z.string().refine(isSeed, 'Not a seed'),
	blockSizes: z.array(z.number().int()),
	method: z.string(),
	hash: z.string(),
	plan: z.object({
		arms: z.array(z.object({ key: z.string(), ratio: z.number() })),
		strata: z.array(z.string()),
		places: z.number().int(),
		bestChance: z.number().optional()
	}),
	places: z.array(
		z.object({
			stratum: z.record(z.string(), z.string()),
			position: z.number().int(),
			arm: z.string(),
			kit: z.string(),
			used: z.boolean()
		})
	),
	chances: z.array(
		z.object({
			position: z.number().int(),
			coin: z.number(),
			draw: z.number(),
			levels: z.record(z.string(), z.string()).nullable(),
			arm: z.string().nullable()
		})
	)
});
export type KeptList = z.infer<typeof keptList>;

export interface Reproduced {
	/** The hash of the list as made again now. */
	hash: string;
	/** What does not agree with what is kept; nothing, when the list is what it should be. */
	differences: string[];
	/** The list made again, head first. */
	rows: string[][];
}

const mostNamed = 20;

/** Makes a list again from its seed, and holds what is kept against it: the hash, each place, each allocation so far. */
export function reproduce(kept: KeptList): Reproduced {
	const made =
		kept.method === minimisationMethod
			? remadeMinimisation(kept)
			: kept.method === listMethod
				? remadeBlocks(kept)
				: null;
	if (!made) throw new RangeError(`This program does not know the method “${kept.method}”.`);
	if (made.hash !== kept.hash)
		made.differences.unshift(
			`The list made again has the hash ${made.hash}; on record is ${kept.hash}.`
		);
	if (made.differences.length > mostNamed)
		made.differences.splice(
			mostNamed,
			Infinity,
			`… and ${made.differences.length - mostNamed} more.`
		);
	return made;
}

function remadeBlocks(kept: KeptList): Reproduced {
	const { hash, entries } = listFrom(kept.seed, kept.blockSizes, kept.plan);
	const differences: string[] = [];
	const there = new Map(
		kept.places.map((each) => [`${stratumKey(each.stratum)} ${each.position}`, each])
	);
	for (const entry of entries) {
		const name = `${entry.stratum} ${entry.position}`;
		const place = there.get(name);
		if (!place) differences.push(`Place ${name} is missing.`);
		else if (place.arm !== entry.arm || place.kit !== entry.kit)
			differences.push(`Place ${name} is not what the seed gives.`);
		there.delete(name);
	}
	for (const name of there.keys()) differences.push(`Place ${name} does not follow from the seed.`);
	const used = new Map(kept.places.map((each) => [each.kit, each.used]));
	return {
		hash,
		differences,
		rows: [
			['stratum', 'position', 'block', 'block size', 'arm', 'kit', 'used'],
			...entries.map((entry) => [
				entry.stratum,
				String(entry.position),
				String(entry.block),
				String(entry.blockSize),
				entry.arm,
				entry.kit,
				used.get(entry.kit) ? 'yes' : 'no'
			])
		]
	};
}

function remadeMinimisation(kept: KeptList): Reproduced {
	const made = minimisationFrom(kept.seed, kept.plan);
	const differences: string[] = [];
	const there = new Map(kept.places.map((each) => [each.position, each]));
	for (const each of made.kits) {
		const place = there.get(each.position);
		if (!place || place.arm !== each.arm || place.kit !== each.kit)
			differences.push(`Kit ${each.position} of the pool is not what the seed gives.`);
	}
	const before: { levels: Record<string, string>; arm: string }[] = [];
	const rows = [['position', 'coin', 'draw', 'levels', 'arm']];
	for (const [at, chance] of made.chances.entries()) {
		const held = kept.chances[at];
		if (!held || held.coin !== chance.coin || held.draw !== chance.draw)
			differences.push(`The numbers at position ${chance.position} are not what the seed gives.`);
		let arm = '';
		if (held?.arm && held.levels) {
			// Allocations in their order, each after those before it.
			arm = minimisedArm(kept.plan.arms, made.randomBelow, held.levels, before, chance);
			if (arm !== held.arm)
				differences.push(
					`The allocation at position ${chance.position} is not what the method gives.`
				);
			before.push({ levels: held.levels, arm: held.arm });
		}
		rows.push([
			String(chance.position),
			String(chance.coin),
			String(chance.draw),
			held?.levels ? stratumKey(held.levels) : '',
			arm
		]);
	}
	return { hash: made.hash, differences, rows };
}

/** Cells hold keys and numbers only; a comma or quotation mark in one would still not break a line. */
export const asCsv = (rows: readonly (readonly string[])[]): string =>
	rows
		.map((row) =>
			row.map((cell) => (/[",\n]/.test(cell) ? `"${cell.replaceAll('"', '""')}"` : cell)).join(',')
		)
		.join('\r\n') + '\r\n';
