import { migrationConfig } from '$lib/server/config';
import { install } from '$lib/server/db/install';

try {
	const applied = await install(migrationConfig().ownerUrl);
	for (const name of applied) console.log(`applied ${name}`);
	if (applied.length === 0) console.log('up to date');
} catch (error) {
	console.error(error instanceof Error ? error.message : String(error));
	process.exitCode = 1;
}
