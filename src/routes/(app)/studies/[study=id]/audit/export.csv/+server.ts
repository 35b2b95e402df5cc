import { stringify } from 'csv-stringify/sync';
import { beginExport } from '$lib/domain/audit/audit.commands.server';
import { filterFrom, type AuditEvent } from '$lib/domain/audit/audit.input';
import { eventsAfter } from '$lib/domain/audit/audit.reads.server';
import { countTry } from '$lib/server/auth/throttle';
import { actorOf, serve } from '$lib/server/serve';
import type { RequestHandler } from './$types';

const columns = [
	'event',
	'at',
	'person',
	'role',
	'action',
	'record',
	'record_id',
	'site',
	'subject',
	'said',
	'field',
	'before',
	'after',
	'reason',
	'request'
];

/** One line for each field that changed; an event without fields has one line. */
function lines(event: AuditEvent): (string | number | null)[][] {
	const head = [
		event.id,
		event.at,
		event.who,
		event.role,
		event.action,
		event.record,
		event.recordId,
		event.site,
		event.subject,
		event.said
	];
	const tail = [event.reason, event.requestId];
	const changes =
		event.changes.length > 0
			? event.changes.map((c) => [c.field, c.before, c.after])
			: [[event.hidden ? '(not shown: it identifies somebody)' : '', null, null]];
	return changes.map((change) => [...head, ...change, ...tail]);
}

/** Text that a spreadsheet would run is made harmless; a negative number stays a number. */
const written = (rows: unknown[][]) =>
	stringify(rows, { escape_formulas: true, record_delimiter: 'windows' });

export const GET: RequestHandler = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const filter = filterFrom(url.searchParams);
	const upTo = await serve(async () => {
		await countTry('export', actor.personId);
		return beginExport(actor, params.study, filter);
	});
	let after = '0';
	const encoder = new TextEncoder();
	const body = new ReadableStream<Uint8Array>({
		start: (controller) => controller.enqueue(encoder.encode(written([columns]))),
		async pull(controller) {
			try {
				const found = await eventsAfter(actor, params.study, filter, { after, upTo, limit: 500 });
				const last = found.at(-1);
				if (!last) return controller.close();
				after = last.id;
				controller.enqueue(encoder.encode(written(found.flatMap(lines))));
			} catch (error) {
				// A file that ends early must not look whole.
				controller.error(error);
			}
		}
	});
	return new Response(body, {
		headers: {
			'content-type': 'text/csv; charset=utf-8',
			'content-disposition': 'attachment; filename="audit-trail.csv"',
			'cache-control': 'no-store'
		}
	});
};
