import { writeFileSync } from 'node:fs';
import { parseArgs } from 'node:util';
import { sql } from 'kysely';
import { asker } from '$lib/command-line/ask';
import { asCsv, keptList, reproduce } from '$lib/domain/randomisation/reproduce.server';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import { actorFor } from '$lib/server/auth/actor';
import { personForPassword } from '$lib/server/auth/session';
import { change, readOwn } from '$lib/server/change';
import { closedConfig } from '$lib/server/config';
import { database, openDatabase, useDatabase } from '$lib/server/db/db';

/**
 * Makes a study's allocation list again from its recorded seed and holds it against what is kept: for the independent
 * statistician of the study, who proves to be that by address and password, and for nobody else.
 */
const usage = 'allocation-list --study CODE [--email ADDRESS] [--out FILE]';

async function main(): Promise<number> {
	const { values } = parseArgs({
		options: {
			study: { type: 'string' },
			email: { type: 'string' },
			out: { type: 'string' }
		}
	});
	if (!values.study) {
		console.error(`Say which study: ${usage}`);
		return 2;
	}
	const { databaseUrl } = closedConfig();
	const requestId = newId();
	const prompt = asker();
	const email = values.email ?? (await prompt.ask('E-mail address: '));
	const password = await prompt.ask('Password: ', true);
	prompt.close();
	const person = await personForPassword(email, password, requestId);
	if (!person) {
		console.error('This address and password do not belong together. The attempt was recorded.');
		return 1;
	}
	const actor = await actorFor(person.id, requestId);
	const study = await readOwn(actor, (reader) =>
		reader
			.selectFrom('study')
			.select(['id', 'code', 'name'])
			.where(sql`lower(code)`, '=', values.study!.toLowerCase())
			.executeTakeFirst()
	);
	// The same words for a study that is not there and for one that is somebody else's.
	if (!study) throw new Refusal('NOT_FOUND');
	const open = database();
	useDatabase(openDatabase(databaseUrl, 1));
	const kept = await change(actor, 'allocation.make', { studyId: study.id }, async (writer) => {
		const { rows } = await sql<{
			list: unknown;
		}>`select closed.read_list(${study.id}::uuid) as list`.execute(writer);
		return rows[0]?.list ?? null;
	});
	await database().close();
	useDatabase(open);
	if (kept === null) {
		console.error('There is no allocation list of this study yet.');
		return 1;
	}
	const list = keptList.parse(kept);
	const { hash, differences, rows } = reproduce(list);
	const used =
		list.chances.length > 0
			? list.chances.filter((each) => each.arm).length
			: list.places.filter((each) => each.used).length;
	console.log(`Study        ${study.code}, ${study.name}`);
	console.log(`Method       ${list.method}`);
	console.log(`On record    ${list.hash}`);
	console.log(`Made again   ${hash}`);
	console.log(`Places       ${rows.length - 1}, ${used} used`);
	for (const line of differences) console.log(line);
	console.log(
		differences.length === 0
			? 'The list follows from its seed, place by place.'
			: 'The list is NOT what its seed gives.'
	);
	if (values.out) {
		// Never over a file that is there: it might be read by others already.
		writeFileSync(values.out, asCsv(rows), { mode: 0o600, flag: 'wx' });
		console.log(`Written to ${values.out}, readable by you alone. It holds arms: keep it sealed.`);
	}
	return differences.length === 0 ? 0 : 1;
}

try {
	process.exitCode = await main();
	await database().close();
} catch (error) {
	const { code } = (error ?? {}) as { code?: string };
	console.error(
		code === 'EEXIST'
			? 'There is a file of that name already. Nothing was written.'
			: error instanceof Error
				? error.message
				: String(error)
	);
	// Whatever is still open must not keep the program waiting.
	process.exit(1);
}
