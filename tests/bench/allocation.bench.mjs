// Allocations by 50 people at the same instant, through the command as the web server calls it: by either method, and from stock.
import { withModules } from './support/load.mjs';
import { print } from '../../scripts/lib/say.mjs';

const subjects = 500;
const atOnce = 50;

await withModules(async (load) => {
	const { freshDatabase, useEnvironment } = await load('tests/support/database.ts');
	const { addBareSubjects, sceneOf } = await load('tests/support/allocation-scene.ts');
	const { makeList, useAs } = await load('tests/support/scene.ts');
	const { randomiseSubject } = await load('src/lib/domain/subject/subject.commands.server.ts');
	const kits = await load('src/lib/domain/kit/kit.commands.server.ts');

	for (const [name, method, stocked] of [
		['permuted blocks', 'permuted-blocks', false],
		['minimisation', 'minimisation', false],
		['minimisation from stock', 'minimisation', true]
	]) {
		const db = await freshDatabase();
		useEnvironment(db);
		const begin = useAs(db.appUrl);
		const scene = await sceneOf(db, { plannedSubjects: subjects, allocation: { method } });
		if (stocked) await kits.planKits(scene.manager, scene.studyId, { useDays: 0 });
		await makeList(db, scene);
		await begin();
		const end = useAs(db.appUrl);
		if (stocked) {
			const [{ id: siteId }] = scene.sites;
			const level = { siteId, fullStock: 1200, resupplyAt: 1100, version: 0 };
			await kits.setKitLevel(scene.manager, scene.studyId, level);
			const sent = await kits.sendKits(scene.manager, scene.studyId, {
				siteId,
				expiresOn: '2099-01-31'
			});
			await kits.receiveKits(scene.coordinator, scene.studyId, sent.id);
		}
		const people = await addBareSubjects(db, scene, subjects, (/** @type {number} */ n) => ({
			site: 0,
			stratum: { 'kidney-function': n % 2 ? 'below-45' : 'from-45' }
		}));
		await db.sql('analyze');
		/** @type {number[]} */
		const times = [];
		const begun = performance.now();
		for (let from = 0; from < subjects; from += atOnce)
			await Promise.all(
				people.slice(from, from + atOnce).map(async (/** @type {{ id: string }} */ { id }) => {
					const at = performance.now();
					await randomiseSubject(scene.coordinator, scene.studyId, id);
					times.push(performance.now() - at);
				})
			);
		const seconds = (performance.now() - begun) / 1000;
		times.sort((a, b) => a - b);
		const at = (/** @type {number} */ share) =>
			Math.round(times[Math.floor(share * (times.length - 1))] ?? 0);
		print(
			`${name}: ${subjects} allocations, ${atOnce} at once: ${(subjects / seconds).toFixed(0)} a second; waited ${at(0.5)} ms (median), ${at(0.95)} ms (95 %)`
		);
		await end();
		await db.drop();
	}
});
