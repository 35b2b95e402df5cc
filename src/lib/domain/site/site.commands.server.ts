import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Writer } from '$lib/server/change';
import type { Capability } from '$lib/server/permission';
import { plainDateOf } from '$lib/time/dates';
import { getSite } from '../subject/site.reads.server';
import type { Closure } from '../schedule/booking';
import {
	mostClosures,
	type ApprovalInput,
	type ClosureInput,
	type ReopenInput
} from './site.input';

/** Records the day of the site's approval; nobody is enrolled there before it. */
export const approveSite = (
	actor: Actor,
	studyId: string,
	siteId: string,
	input: ApprovalInput,
	version: number
): Promise<{ version: number }> =>
	change(
		actor,
		'site.approve',
		{ studyId, siteId },
		async (writer) => {
			const site = await getSite(writer, studyId, siteId);
			if (input.approvedOn > site.today)
				throw new Refusal(
					'FUTURE',
					{ what: 'The approval' },
					{ approvedOn: 'An approval is recorded once it has been given.' }
				);
			const first = await writer
				.selectFrom('subject')
				.select((of) => of.fn.min('enrolled_on').as('day'))
				.where('study_id', '=', studyId)
				.where('site_id', '=', siteId)
				.where('imported_as', 'is', null)
				.executeTakeFirst();
			if (first?.day && first.day < input.approvedOn)
				throw new Refusal(
					'RULE',
					{ why: `Somebody was enrolled at ${site.name} on ${first.day} already.` },
					{ approvedOn: 'The approval cannot be later than the first enrolment.' }
				);
			const changed = await writer
				.updateTable('site')
				.set({ approved_on: input.approvedOn })
				.where('id', '=', siteId)
				.where('version', '=', version)
				.returning('version')
				.execute();
			mustHaveChanged(changed);
			return { version: changed[0]?.version ?? version };
		},
		{ reason: `Approval of the site recorded.` }
	);

async function changeClosures(
	actor: Actor,
	capability: Capability,
	studyId: string,
	siteId: string,
	version: number,
	reason: string,
	next: (closures: readonly Closure[]) => Closure[]
): Promise<{ version: number }> {
	return change(
		actor,
		capability,
		{ studyId, siteId },
		async (writer: Writer) => {
			const site = await writer
				.selectFrom('site')
				.select('closures')
				.where('study_id', '=', studyId)
				.where('id', '=', siteId)
				.forUpdate()
				.executeTakeFirst();
			if (!site) throw new Refusal('NOT_FOUND');
			const closures = next(site.closures as Closure[]);
			const changed = await writer
				.updateTable('site')
				.set({ closures: JSON.stringify(closures) })
				.where('id', '=', siteId)
				.where('version', '=', version)
				.returning('version')
				.execute();
			mustHaveChanged(changed);
			return { version: changed[0]?.version ?? version };
		},
		{ reason }
	);
}

/** Closes the site on some days. Bookings on them stay until somebody moves them: the page lists them. */
export const closeSite = (
	actor: Actor,
	studyId: string,
	siteId: string,
	input: ClosureInput,
	version: number
): Promise<{ version: number }> =>
	changeClosures(actor, 'site.close', studyId, siteId, version, input.reason, (closures) => {
		const closure = {
			from: plainDateOf(input.from),
			to: plainDateOf(input.to),
			reason: input.reason
		};
		if (closure.to < closure.from)
			throw new Refusal(
				'RULE',
				{ why: 'The last day lies before the first.' },
				{ to: 'Choose the first day or a later one.' }
			);
		if (closures.length >= mostClosures)
			throw new Refusal('RULE', { why: `A site has at most ${mostClosures} closures.` });
		const there = closures.find((each) => each.from <= closure.to && closure.from <= each.to);
		if (there)
			throw new Refusal(
				'RULE',
				{ why: `The site is closed from ${there.from} to ${there.to} already: ${there.reason}.` },
				{ from: 'These days overlap another closure.' }
			);
		return [...closures, closure].sort((a, b) => (a.from < b.from ? -1 : 1));
	});

/** Takes a closure back. */
export const reopenSite = (
	actor: Actor,
	studyId: string,
	siteId: string,
	input: ReopenInput,
	version: number
): Promise<{ version: number }> =>
	changeClosures(actor, 'site.close', studyId, siteId, version, 'Open again.', (closures) => {
		const left = closures.filter((each) => each.from !== input.from || each.to !== input.to);
		if (left.length === closures.length)
			throw new Refusal('CONFLICT', { what: 'There is no such closure any more.' });
		return left;
	});
