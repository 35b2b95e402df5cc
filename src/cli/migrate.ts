import { migrationConfig } from '$lib/server/config';
import { migrateToLatest } from '$lib/server/db/migrate';

try {
	const applied = await migrateToLatest(migrationConfig().ownerUrl);
	for (const name of applied) console.log(`applied ${name}`);
	if (applied.length === 0) console.log('up to date');
} catch (error) {
	console.error(error instanceof Error ? error.message : String(error));
	process.exitCode = 1;
}
