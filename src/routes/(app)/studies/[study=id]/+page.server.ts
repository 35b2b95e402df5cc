import { redirect } from '@sveltejs/kit';
import { findCuts } from '$lib/domain/cut/cut.reads.server';
import { findReconsents } from '$lib/domain/consent/reconsent.reads.server';
import { findTransfers } from '$lib/domain/subject/transfer.reads.server';
import { findLooks } from '$lib/domain/look/look.reads.server';
import { findLowStock } from '$lib/domain/kit/kit.reads.server';
import { toldRoles } from '$lib/domain/unmasking/notice.server';
import { findRecentUnmaskings } from '$lib/domain/unmasking/unmasking.reads.server';
import { findToRecord } from '$lib/domain/measurement/measurement.reads.server';
import { findWaiting } from '$lib/domain/signature/signature.reads.server';
import {
	countScreenings,
	getSiteCounts,
	getStudyState,
	getWorkAtSites,
	rolesIn
} from '$lib/domain/visit/today.reads.server';
import { windowsQuery } from '$lib/domain/visit/windows.input';
import { findWindows } from '$lib/domain/visit/windows.reads.server';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import { clock } from '$lib/time/clock';
import { dateText, plainDateOf, shortDateText } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import type { PageServerLoad } from './$types';
import { pointersFor } from './pointers';

/** Each role finds its own day here; somebody with several roles finds each of them. */
export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const studyId = params.study;
	const roles = rolesIn(actor, studyId);
	const has = (...wanted: Parameters<typeof roles.has>[0][]) =>
		wanted.some((role) => roles.has(role));
	// A board member comes twice a year, to one place.
	if (roles.size === 1 && roles.has('board_member')) redirect(303, `/studies/${studyId}/board`);
	return serve(async () => {
		const atSites = has('coordinator', 'nurse', 'pharmacist', 'investigator');
		const coordinator = roles.has('coordinator');
		const analyst = has('statistician', 'independent_statistician');
		const [
			work,
			windows,
			counts,
			screenings,
			state,
			cuts,
			looks,
			toSign,
			unmaskings,
			low,
			apart,
			transfers,
			asked
		] = await Promise.all([
			atSites ? getWorkAtSites(actor, studyId) : null,
			coordinator
				? findWindows(actor, studyId, windowsQuery.parse({ limit: 8 }), 'visit.book')
				: null,
			has('monitor', 'data_manager') ? getSiteCounts(actor, studyId) : null,
			has('coordinator', 'investigator') ? countScreenings(actor, studyId) : null,
			roles.has('data_manager') ? getStudyState(actor, studyId) : null,
			analyst ? findCuts(actor, studyId) : null,
			analyst ? findLooks(actor, studyId) : null,
			may(actor.grants, 'signature.sign', { studyId }) ? findWaiting(actor, studyId) : null,
			has(...toldRoles) ? findRecentUnmaskings(actor, studyId) : [],
			has('coordinator', 'pharmacist', 'data_manager') ? findLowStock(actor, studyId) : [],
			may(actor.grants, 'visit.record', { studyId }) ? findToRecord(actor, studyId) : [],
			atSites ? findTransfers(actor, studyId) : [],
			has('coordinator', 'investigator') ? findReconsents(actor, studyId) : null
		]);
		return {
			day: work?.day ?? dateText(dateInZone(clock.now(), 'UTC')),
			work,
			transfers,
			notices: { unmaskings, low },
			windows,
			counts,
			apart: apart.map((each) => ({ ...each, on: shortDateText(plainDateOf(each.on)) })),
			pharmacist: roles.has('pharmacist'),
			screenings,
			state,
			toSign:
				toSign &&
				toSign.items.map(({ record, recordId, title, place, broken }) => ({
					record,
					recordId,
					title,
					place,
					again: broken !== null
				})),
			may: {
				book: coordinator,
				chase: coordinator,
				measure: may(actor.grants, 'visit.measure', { studyId })
			},
			pointers: pointersFor(
				roles,
				studyId,
				state,
				screenings,
				cuts && looks ? { cuts, looks } : null,
				asked?.tasks ?? null
			)
		};
	});
};
