import { sql } from 'kysely';
import { setUpLink } from '$lib/domain/person/link.commands.server';
import { newId } from '$lib/id';
import { systemActor } from '$lib/server/actor';
import { readOwn } from '$lib/server/change';
import { database } from '$lib/server/db/db';
import { verifySignatures } from '$lib/domain/signature/verify.server';
import { sealNow } from '$lib/server/jobs/seal';

/** Small offices of the command line: setup-link, seal, verify-audit, verify-signatures. The status is 1 when something is wrong. */
const offices: Record<string, () => Promise<number>> = {
	async 'setup-link'() {
		const link = await setUpLink(newId());
		if (link === null) {
			console.error('Heddle is set up already: an administrator invites people in the browser.');
			return 1;
		}
		console.log(link);
		return 0;
	},
	async seal() {
		console.log(`${await sealNow()} events sealed.`);
		return 0;
	},
	async 'verify-signatures'() {
		const { lines, damaged, missing } = await verifySignatures(systemActor(newId()));
		for (const line of lines) console.log(line);
		return damaged + missing === 0 ? 0 : 1;
	},
	async 'verify-audit'() {
		return readOwn(systemActor(newId()), async (reader) => {
			const breaks = await sql<{ seal: string | null; event_id: string | null; what: string }>`
				select * from audit.verify()`.execute(reader);
			for (const { seal, event_id, what } of breaks.rows)
				console.log(
					[event_id && `event ${event_id}`, seal && `seal ${seal}`].filter(Boolean).join(', ') +
						`: ${what}`
				);
			const { rows } = await sql<{
				events: string;
				sealed: string;
				seals: string;
				head: string | null;
			}>`select * from audit.state()`.execute(reader);
			const state = rows[0];
			if (!state) return 1;
			const open = Number(state.events) - Number(state.sealed);
			console.log(
				`${state.events} events, ${state.sealed} sealed in ${state.seals} seals, ${open} not sealed yet.`
			);
			if (state.head) console.log(`Newest seal: ${state.head}`);
			console.log(
				breaks.rows.length === 0
					? 'The audit trail is whole.'
					: `The audit trail is broken in ${breaks.rows.length} places.`
			);
			return breaks.rows.length === 0 ? 0 : 1;
		});
	}
};

const office = offices[process.argv[2] ?? ''];
if (!office) {
	console.error(`Say what to do: ${Object.keys(offices).join(', ')}.`);
	process.exitCode = 2;
} else {
	try {
		process.exitCode = await office();
		await database().close();
	} catch (error) {
		console.error(error instanceof Error ? error.message : String(error));
		// Whatever is still open must not keep the program waiting.
		process.exit(1);
	}
}
