import pg from 'pg';
import { closedConfig, config, migrationConfig } from '$lib/server/config';
import { makeDemo } from '$lib/demo/make.server';
import { openDatabase, useDatabase } from '$lib/server/db/db';
import { ids } from '$lib/id';

/**
 * Makes the demo by Heddle's own commands, with the clock moved from day to day, so that its audit trail is genuine. Only the
 * owner can mark a database as one whose clock may be moved; the mark goes when the demo is made.
 */
/** Nobody's work is lost if the machine stops while a demo is made: it is simply made again. So no commit waits for the disk. */
const unhurried = (url: string) =>
	`${url}${url.includes('?') ? '&' : '?'}options=-c%20synchronous_commit%3Doff`;

const owner = new pg.Client({ connectionString: migrationConfig().ownerUrl });
await owner.connect();
const sides = {
	app: openDatabase(unhurried(config().databaseUrl)),
	unmasked: openDatabase(unhurried(closedConfig().databaseUrl), 2)
};
try {
	const { rows } = await owner.query<{ people: string }>(
		`select count(*) as people from app.person where kind = 'person'`
	);
	if (rows[0]?.people !== '0')
		throw new Error('There are people in this database already: the demo is made in an empty one.');
	await owner.query('update app.installation set clock_may_move = true');
	useDatabase(sides.app);
	ids.seed(20_260_609);
	const accounts = await makeDemo(sides, (share, text) =>
		console.log(`progress ${share.toFixed(3)} ${text}`)
	);
	ids.reset();
	// What was worked on here needs no worker any more; what is still waiting stays in the queue.
	await owner.query(`delete from queue.job where name in ('look', 'by-arm-look', 'allocation-list', 'report', 'closed-report', 'release', 'closed-release', 'import')
		or (name = 'mail' and (data ->> 'mailId')::uuid in (select id from app.mail where status <> 'waiting'))`);
	await owner.query('analyze');
	console.log('progress 1 The demo is ready');
	console.log(`accounts ${JSON.stringify(accounts)}`);
} catch (error) {
	console.error(error instanceof Error ? (error.stack ?? error.message) : String(error));
	process.exitCode = 1;
} finally {
	await owner.query('update app.installation set clock_may_move = false').catch(() => {});
	await owner.end();
	await sides.app.close();
	await sides.unmasked.close();
}
process.exit();
