import { database } from '../db/db';
import { log } from '../log';

/** Lets the job in hand finish, then ends; a second signal ends at once. */
export function stopOnSignal(worker: { stop(): Promise<void> }): void {
	let asked = false;
	const stop = async () => {
		if (asked) process.exit(1);
		asked = true;
		await worker.stop().catch((error: unknown) => log.error({ err: error }, 'stopping'));
		await database().close();
		process.exit(0);
	};
	process.on('SIGTERM', stop);
	process.on('SIGINT', stop);
}
