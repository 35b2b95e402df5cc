// Evidence on dependence: 1,000 parametric-bootstrap refits of a study of 240 subjects and 9 visits with dropout, on one
// thread and on all, model by model; then the whole answer with its 400 refits. Nothing is judged.
import { mkdtempSync, rmSync } from 'node:fs';
import { availableParallelism, cpus, tmpdir } from 'node:os';
import { join } from 'node:path';
import { build } from 'vite';
import { root } from '../../scripts/lib/places.mjs';
import { withModules } from './support/load.mjs';

const folder = mkdtempSync(join(tmpdir(), 'heddle-evidence-'));
await build({
	configFile: false,
	logLevel: 'error',
	resolve: { alias: { $lib: join(root, 'src/lib') } },
	ssr: { noExternal: true },
	build: {
		ssr: true,
		target: 'node20',
		outDir: folder,
		rollupOptions: {
			input: join(root, 'src/cli/evidence-thread.ts'),
			output: { entryFileNames: 'thread.mjs' }
		}
	}
});
const program = join(folder, 'thread.mjs');

/** The same study with every visit some days off its day. */
function offItsDay(design, uniform) {
	const time = design.time.map((t) => t + (uniform() - 0.5) / 2);
	const x = design.x.slice();
	for (let i = 0; i < design.n; i++) {
		const arm = x[2 * design.n + i];
		x[design.n + i] = time[i];
		x[3 * design.n + i] = time[i] * arm;
	}
	return { ...design, time, x };
}

async function timed(work) {
	const used = process.cpuUsage();
	const from = performance.now();
	const value = await work();
	const { user, system } = process.cpuUsage(used);
	return { value, seconds: (performance.now() - from) / 1000, cpu: (user + system) / 1e6 };
}

const kinds = [
	['level', false],
	['level+slope', false],
	['serial', false],
	['serial+noise', false],
	['level+serial', false],
	['level', true],
	['serial', true]
];

try {
	await withModules(async (load) => {
		const { planEvidence } = await load('src/lib/stats/evidence/plan-evidence.ts');
		const { memberOf } = await load('src/lib/stats/evidence/family.ts');
		const { startOf, inverseAt } = await load('src/lib/stats/evidence/restart.ts');
		const { inventStudy } = await load('src/lib/stats/evidence/example.ts');
		const { fitModel } = await load('src/lib/stats/fit/fit-model.ts');
		const { randomStream } = await load('src/lib/stats/numeric/random.ts');
		const { evidenceInThreads } = await load('src/lib/command-line/evidence-in-threads.ts');
		const threads = availableParallelism();
		console.log(
			`${cpus()[0]?.model}, ${threads} threads; seconds by the clock (and of all processors)\n`
		);
		const truth = { level: 1, serial: 1, rho: 0.6, noise: 0.5, visit: 0.1 };
		const onTheDay = inventStudy(truth, 240, 9, [20261220, 1], 0.11);
		const { uniform } = randomStream(20261220, 2);
		for (const [name, design] of [
			['visits on their day', onTheDay],
			['visits some days off', offItsDay(onTheDay, uniform)]
		]) {
			console.log(`${name}, ${design.n} rows; 1,000 refits of`);
			const told = planEvidence(design, { refits: 100 }).models;
			for (const [kind, visits] of kinds) {
				const member = memberOf(kind, visits);
				const fit = fitModel(design, member.dependence, { method: 'reml' });
				const working = startOf(fit.prepared, fit.working, fit.boundary);
				const start = {
					working: [...working],
					inverse: inverseAt(fit.prepared, 'reml', working)
				};
				const plan = {
					design,
					method: 'reml',
					refits: 1000,
					seed: 1,
					contrast: null,
					visitsInAll: false,
					models: told,
					members: [{ member, logLikelihood: fit.logLikelihood }],
					comparisons: [],
					worlds: [
						{
							id: member.id,
							number: 1,
							from: member.id,
							working: fit.working,
							refit: [member.id],
							starts: [start]
						}
					]
				};
				const one = await timed(() => evidenceInThreads(plan, { workers: 1, program }));
				const all = await timed(() => evidenceInThreads(plan, { workers: threads, program }));
				const { restarted, failed } = all.value.refitted;
				console.log(
					`  ${member.id.padEnd(16)} one thread ${one.seconds.toFixed(2).padStart(6)} s   ${threads} threads ${all.seconds.toFixed(2).padStart(6)} s   begun anew ${restarted}, failed ${failed}`
				);
			}
			const planned = await timed(() => planEvidence(design));
			const answered = await timed(() => evidenceInThreads(planned.value, { program }));
			console.log(
				`  the whole answer: models ${planned.seconds.toFixed(2)} s, ${answered.value.refitted.refits} refits on ${threads} threads ${answered.seconds.toFixed(2)} s (${answered.cpu.toFixed(2)}): ${answered.value.answers.verdict}\n`
			);
		}
	});
} finally {
	rmSync(folder, { recursive: true, force: true });
}
process.exit(0);
