import { config } from '$lib/server/config';
import { openHandlers } from '$lib/server/jobs/handlers';
import { startWorker } from '$lib/server/jobs/worker';
import { stopOnSignal } from '$lib/server/jobs/stop';

/** The ordinary worker: mail, imports, masked fits, open reports, sealing. It holds nothing closed. */
const { mail, ...others } = openHandlers;
const worker = await startWorker(
	config().databaseUrl,
	// Without a mail server mails wait in the queue instead of using up their tries.
	config().mail ? { mail, ...others } : others,
	{ seal: '* * * * *' }
);
stopOnSignal(worker);
console.log('ready');
