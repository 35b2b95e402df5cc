import { byArmLookJob, lookJob } from '../looks/jobs';
import type { Handlers } from './worker';

/** What the ordinary worker does, each queue's work in a file of its own. */
export const openHandlers: Handlers = {
	look: lookJob
};

/** What the look worker does, with the by-arm reader. */
export const closedHandlers: Handlers = {
	'by-arm-look': byArmLookJob
};
