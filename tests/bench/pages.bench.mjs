// Pages of a study of 20,000 subjects × 9 visits (some 800,000 values), whole HTML answers, through a web server as it runs in earnest.
import { withModules } from './support/load.mjs';
import { measure } from './support/measure.mjs';

const password = 'linen warp and weft';
const subjects = 20_000;

await withModules(async (load) => {
	const { freshDatabase, useEnvironment } = await load('tests/support/database.ts');
	const { asOwner, signIn } = await load('tests/support/people.ts');
	const { addActor, visitScene } = await load('tests/support/visit-scene.ts');
	const { startServer } = await load('tests/support/server.ts');
	const { bigStudy } = await load('tests/proof/support/big-study.ts');
	const { hashPassword } = await load('src/lib/server/auth/password.ts');

	const db = await freshDatabase();
	useEnvironment(db);
	const passwordHash = await hashPassword(password);
	const scene = await visitScene(db, { passwordHash });
	const { studyId } = scene;
	/** @param {string} name @param {string} role @param {string | null} site */
	const person = (name, role, site) => addActor(db, name, role, studyId, site, passwordHash);
	const monitor = await person('Mona Pick', 'monitor', null);
	const auditor = await person('Aldo Reis', 'auditor', null);
	await asOwner(db, (/** @type {any} */ client) => bigStudy(client, scene, subjects));
	await db.sql('analyze');
	const [[subject], [visit]] = await db.sql(
		`select id from app.subject where study_id = '${studyId}' and site_id = '${scene.sites[0].id}' order by enrolled_on limit 1`,
		`select v.id from app.visit v where v.study_id = '${studyId}' and v.site_id = '${scene.sites[0].id}' and v.status = 'completed' limit 1`
	);
	const server = await startServer({ database: db });
	try {
		const coordinator = await signIn(server, scene.sites[0].coordinator.email, password);
		const manager = await signIn(server, scene.manager.email, password);
		const watching = await signIn(server, monitor.email, password);
		const inspecting = await signIn(server, auditor.email, password);
		/** @param {any} visitor @param {string} path */
		const get = async (visitor, path) => {
			const answer = await visitor.get(`/studies/${studyId}${path}`);
			const text = await answer.text();
			if (answer.status !== 200) throw new Error(`${path}: ${answer.status} ${text.slice(0, 200)}`);
		};
		/** @type {[string, any, string][]} */
		const pages = [
			['Today of a coordinator', coordinator, ''],
			['Today of a data manager', manager, ''],
			['windows of one site', coordinator, '/windows'],
			['windows of both sites', watching, '/windows'],
			['chase', coordinator, '/chase'],
			['threads', coordinator, '/subjects'],
			['threads of both sites', watching, '/subjects'],
			['threads, searched by number', watching, '/subjects?search=4321'],
			['one subject’s record', coordinator, `/subjects/${subject.id}`],
			['one visit', coordinator, `/visits/${visit.id}`],
			['screening log', coordinator, '/screening'],
			['schedule', manager, '/schedule'],
			['sites', manager, '/sites'],
			['data cuts', manager, '/cuts'],
			['audit trail', inspecting, '/audit']
		];
		for (const [name, visitor, path] of pages) await measure(name, 20, () => get(visitor, path));
	} finally {
		await server.stop();
		await db.drop();
	}
});
process.exit(0);
