import { closedConfig } from '$lib/server/config';
import { openDatabase, useDatabase } from '$lib/server/db/db';
import { closedHandlers } from '$lib/server/jobs/handlers';
import { startWorker } from '$lib/server/jobs/worker';
import { stopOnSignal } from '$lib/server/jobs/stop';

/** The look worker: the one process with the unmasked role. By-arm looks, allocation lists, closed reports. */
const { databaseUrl } = closedConfig();
useDatabase(openDatabase(databaseUrl, 4));
const worker = await startWorker(databaseUrl, closedHandlers);
stopOnSignal(worker);
console.log('ready');
