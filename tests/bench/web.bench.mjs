// Through a web server as it runs in earnest: lists of a study of 2,000 subjects × 9 visits, one value saved, signing in.
import { withModules } from './support/load.mjs';
import { measure } from './support/measure.mjs';

const password = 'linen warp and weft';

await withModules(async (load) => {
	const { freshDatabase, useEnvironment } = await load('tests/support/database.ts');
	const { asOwner, signIn } = await load('tests/support/people.ts');
	const { addActor, addSubject, around, visitScene } = await load('tests/support/visit-scene.ts');
	const { startServer } = await load('tests/support/server.ts');
	const { bigStudy } = await load('tests/proof/support/big-study.ts');
	const { hashPassword } = await load('src/lib/server/auth/password.ts');
	const { dateInZone } = await load('src/lib/time/zones.ts');

	const db = await freshDatabase();
	useEnvironment(db);
	const passwordHash = await hashPassword(password);
	const scene = await visitScene(db, { passwordHash });
	const { studyId } = scene;
	const monitor = await addActor(db, 'Mona Pick', 'monitor', studyId, null, passwordHash);
	await asOwner(db, (/** @type {any} */ client) => bigStudy(client, scene));
	const [site] = scene.sites;
	/** @type {string[]} */
	const visits = [];
	for (let n = 0; n < 20; n++) {
		const subject = await addSubject(db, scene, {
			windows: { 'month-6': around(dateInZone(new Date(), site.zone)) }
		});
		visits.push(subject.visits['month-6']);
	}
	await db.sql('analyze');
	const server = await startServer({ database: db });
	try {
		const watching = await signIn(server, monitor.email, password);
		const nurse = await signIn(server, site.nurse.email, password);
		const coordinator = await signIn(server, site.coordinator.email, password);
		/** @param {any} visitor @param {string} path */
		const get = async (visitor, path) => {
			const answer = await visitor.get(path);
			await answer.arrayBuffer();
			if (answer.status !== 200) throw new Error(`${path}: ${answer.status}`);
		};
		/** @param {number} status @param {Response} answer */
		const mustBe = async (status, answer) => {
			const text = await answer.text();
			if (answer.status !== status) throw new Error(`${answer.status} ${text}`);
		};
		const windows = `/api/studies/${studyId}/windows?what=due`;
		await measure('windows of one site, first page', 100, () => get(coordinator, windows));
		await measure(
			'windows of one site, first page, 8 at once',
			200,
			() => get(coordinator, windows),
			{
				atOnce: 8
			}
		);
		await measure('windows of all sites, first page', 100, () => get(watching, windows));
		await measure('threads, first page', 50, () =>
			get(watching, `/api/studies/${studyId}/subjects`)
		);
		await measure('page of windows', 50, () => get(coordinator, `/studies/${studyId}/windows`));
		await measure('page of threads', 30, () => get(coordinator, `/studies/${studyId}/subjects`));

		for (const visit of visits)
			await mustBe(
				200,
				await nurse.send(
					'POST',
					`/api/studies/${studyId}/visits/${visit}/start`,
					{},
					{
						'if-match': '"1"'
					}
				)
			);
		/** Each visit's value is changed in its turn: version after version. */
		const save = async (/** @type {number} */ n) => {
			const visit = visits[n % visits.length];
			const version = Math.floor(n / visits.length);
			await mustBe(
				200,
				await nurse.send(
					'PUT',
					`/api/studies/${studyId}/visits/${visit}/measurements/${scene.measures.creatinine}`,
					{
						entry: { kind: 'value', value: String(80 + version) },
						reason: version ? 'Read again.' : ''
					},
					version ? { 'if-match': `"${version}"` } : {}
				)
			);
		};
		await measure('one value saved, with what is derived from it', 117, save);

		await measure('sign-in', 20, () => signIn(server, monitor.email, password), { first: 1 });
	} finally {
		await server.stop();
		await db.drop();
	}
});
process.exit(0);
