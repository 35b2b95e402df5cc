import { makeAllocationList } from '$lib/domain/randomisation/allocation.commands.server';
import { sendMail } from '../mail/send';
import { sealTrail } from './seal';
import type { Handlers } from './worker';

/** What the ordinary worker does, each queue's work in a file of its own. */
export const openHandlers: Handlers = {
	mail: sendMail,
	seal: sealTrail
};

/** What the look worker does, with the by-arm reader. */
export const closedHandlers: Handlers = {
	'allocation-list': makeAllocationList
};
