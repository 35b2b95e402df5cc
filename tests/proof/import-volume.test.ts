import { afterAll, beforeAll, expect, test } from 'vitest';
import { forgetStorage } from '../../src/lib/server/storage/storage';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { checkFile, importScene, orthodontMapping, runImport } from '../support/analysis';
import { useAs } from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;
beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	forgetStorage();
	end = useAs(db.appUrl);
});
afterAll(async () => {
	await end?.();
	await db?.drop();
});

test('fifty thousand rows of three measures come in, each with its audit row', async () => {
	const scene = await importScene(db);
	const rows = Array.from({ length: 50_000 }, (_, at) => {
		const subject = at >> 3;
		return `S${subject},${at & 7},${subject % 2 ? 'girl' : 'boy'},${100 + (at % 97) / 10},${at % 50},${at % 3}`;
	});
	const text = `subject,time,sex,height,weight,score\n${rows.join('\n')}\n`;
	const batch = await checkFile(scene, text, {
		...orthodontMapping,
		visit: undefined,
		measures: [
			{ column: 'height', name: 'Height', unit: 'cm', decimals: 1 },
			{ column: 'weight', name: 'Weight', unit: 'kg', decimals: 0 },
			{ column: 'score', name: 'Score', unit: '{score}', decimals: 0 }
		]
	});
	expect(batch.summary?.problemCount).toBe(0);
	const begun = performance.now();
	await runImport(scene, batch.id);
	const seconds = (performance.now() - begun) / 1000;
	console.log(`50,000 rows (150,000 measurements) imported in ${seconds.toFixed(1)} s`);
	const [[counts]] = (await db.sql(
		`select (select count(*) from app.measurement where study_id = '${scene.studyId}')::int as measurements,
			(select count(*) from audit.event where study_id = '${scene.studyId}' and record = 'measurement')::int as events`
	)) as [[{ measurements: number; events: number }]];
	expect(counts).toEqual({ measurements: 150_000, events: 150_000 });
});
