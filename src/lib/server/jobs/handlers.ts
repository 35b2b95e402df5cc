import { makeAllocationList } from '$lib/domain/randomisation/allocation.commands.server';
import { sealedCodesJob } from '$lib/domain/unmasking/codes.server';
import { amendmentJob } from '../amendments/job';
import { importJob } from '../imports/job';
import { byArmLookJob, lookJob } from '../looks/jobs';
import { closedReleaseJob, closedReportJob, releaseJob, reportJob } from '../looks/report-jobs';
import { sendMail } from '../mail/send';
import { sealTrail } from './seal';
import type { Handlers } from './worker';

/** What the ordinary worker does, each queue's work in a file of its own. */
export const openHandlers: Handlers = {
	amendment: amendmentJob,
	import: importJob,
	look: lookJob,
	report: reportJob,
	release: releaseJob,
	mail: sendMail,
	seal: sealTrail
};

/** What the look worker does, with the by-arm reader. */
export const closedHandlers: Handlers = {
	'allocation-list': makeAllocationList,
	'by-arm-look': byArmLookJob,
	'closed-report': closedReportJob,
	'closed-release': closedReleaseJob,
	'sealed-codes': sealedCodesJob
};
