// The engine alone: CPU seconds of fits with the columns already in memory, one thread, and how they grow with the rows.
// Each line runs in a process of its own, so that its memory is its own. Nothing is judged.
import { spawnSync } from 'node:child_process';
import { fileURLToPath } from 'node:url';
import { cpus } from 'node:os';
import { withModules } from './support/load.mjs';

/** Numbers that look like chance and are the same each time (a congruential generator). */
function chance(seed) {
	let state = seed >>> 0;
	const unit = () => {
		state = (Math.imul(state, 1664525) + 1013904223) >>> 0;
		return (state + 0.5) / 2 ** 32;
	};
	return {
		unit,
		normal: () => Math.sqrt(-2 * Math.log(unit())) * Math.cos(2 * Math.PI * unit())
	};
}

/**
 * Two arms of subjects seen at visits, a share of them missing; level, slope, serial and visit parts all there.
 * @param {{ subjects: number, visits: number, missing: number, categorical?: boolean, dropout?: boolean, exact?: boolean }} size
 */
function study({ subjects, visits, missing, categorical = false, dropout = false, exact = true }) {
	const { unit, normal } = chance(20260601);
	const time = [];
	const visit = [];
	const y = [];
	const start = [0];
	const group = [];
	const shared = Array.from({ length: visits }, () => 0.5 * normal());
	for (let s = 0; s < subjects; s++) {
		const arm = s % 2;
		group.push(arm);
		const level = 2 * normal();
		const slope = 0.3 * normal();
		let serial = normal();
		let left = false;
		for (let v = 0; v < visits; v++) {
			serial = 0.6 * serial + 0.8 * normal();
			if (dropout && v > 1 && unit() < missing / visits) left = true;
			const away = dropout ? left || unit() < 0.03 : unit() < missing;
			if (away && !(v === visits - 1 && time.length === start[s])) continue;
			const t = exact ? v : v + (unit() - 0.5) / 2;
			time.push(t);
			visit.push(v);
			y.push(10 + 0.5 * t + 0.2 * arm * t + level + slope * t + serial + shared[v] + normal());
		}
		start.push(time.length);
	}
	const n = time.length;
	const columns = categorical
		? [
				...Array.from({ length: visits }, (_, v) => (i) => (visit[i] === v ? 1 : 0)),
				...Array.from({ length: visits }, (_, v) => (i, arm) => (visit[i] === v ? arm : 0))
			]
		: [() => 1, (i) => time[i], (_, arm) => arm, (i, arm) => time[i] * arm];
	const x = new Float64Array(n * columns.length);
	for (let s = 0; s < subjects; s++)
		for (let i = start[s]; i < start[s + 1]; i++)
			columns.forEach((column, j) => (x[j * n + i] = column(i, group[s])));
	return {
		n,
		p: columns.length,
		x,
		y: Float64Array.from(y),
		names: columns.map((_, j) => `column ${j + 1}`),
		time: Float64Array.from(time),
		visit: Int32Array.from(visit),
		visits: Array.from({ length: visits }, (_, v) => String(v + 1)),
		subjectStart: Int32Array.from(start),
		subjects: Array.from({ length: subjects }, (_, s) => String(s)),
		subjectGroup: Int32Array.from(group),
		groups: ['a', 'b'],
		rowOf: Int32Array.from({ length: n }, (_, i) => i),
		timeInMean: categorical ? 'categorical' : 'linear',
		aliased: []
	};
}

const dependence = (subjectEffects, structure, visitEffects = false) => ({
	subjectEffects,
	visitEffects,
	errors: { structure, along: 'time', varianceBy: 'none' }
});
const models = {
	level: dependence('level', 'independent'),
	'level and slope': dependence('level-and-slope', 'independent'),
	serial: dependence('none', 'serial'),
	'serial + noise': dependence('none', 'serial-with-noise'),
	'level + serial': dependence('level', 'serial'),
	'level + serial + noise': dependence('level', 'serial-with-noise'),
	'level + visit': dependence('level', 'independent', true),
	'level and slope + visit': dependence('level-and-slope', 'independent', true),
	unstructured: dependence('none', 'unstructured')
};
const million = { subjects: 100_000, visits: 10, missing: 0 };
const large = { subjects: 5000, visits: 12, missing: 0.2 };
const demo = { subjects: 240, visits: 9, missing: 0.3, dropout: true };
const growth = [1000, 10_000, 100_000, 1_000_000].map((rows) => ({
	subjects: rows / 10,
	visits: 10,
	missing: 0
}));

/** What is measured: model, size, what follows the fit, and the figure asked for in seconds. */
const lines = [
	['level', million, null, 0.5],
	['level and slope', million, null, 2],
	['serial', million, null, 5],
	['level', large, null, 0.05],
	['level and slope', large, null, 0.15],
	['level and slope', large, 'kenward-roger', 0.5],
	['serial', large, null, 0.3],
	['level + serial', large, null, 1],
	['level + visit', large, null, 0.25],
	['level and slope + visit', large, null, 1.4],
	['level + visit', large, 'kenward-roger', null],
	['level and slope + visit', large, 'kenward-roger', null],
	['serial', { ...large, exact: false }, null, 0.3],
	['level + serial', { ...large, exact: false }, null, 1],
	['level + serial + noise', large, null, null],
	['unstructured', { ...demo, categorical: true }, 'satterthwaite', 1],
	['unstructured', { ...demo, categorical: true }, 'kenward-roger', null],
	...['level', 'level and slope', 'serial', 'level + serial', 'level and slope + visit'].flatMap(
		(model) => growth.map((size) => [model, size, null, null])
	)
];
const refits = ['level', 'level and slope', 'serial', 'level + serial', 'level + visit'];

const seconds = (work) => {
	const from = process.cpuUsage();
	const value = work();
	const used = process.cpuUsage(from);
	return { value, seconds: (used.user + used.system) / 1e6 };
};

/** One line in this process. */
async function one(index) {
	await withModules(async (load) => {
		const { fitModel } = await load('src/lib/stats/fit/fit-model.ts');
		const { precisionOf } = await load('src/lib/stats/inference/precision.ts');
		const [model, size, rule] = lines[index];
		const design = study(size);
		const before = process.memoryUsage().rss;
		const run = () => {
			const fit = fitModel(design, models[model], { method: 'reml' });
			if (rule) {
				const precision = precisionOf(fit, rule);
				design.names.forEach((_, j) =>
					precision.test(design.names.map((__, k) => (k === j ? 1 : 0)))
				);
			}
			return fit;
		};
		const first = seconds(run);
		const again = design.n <= 100_000 ? [seconds(run), seconds(run)] : [];
		const best = Math.min(first.seconds, ...again.map((a) => a.seconds));
		console.log(
			JSON.stringify({
				rows: design.n,
				cold: first.seconds,
				warm: best,
				evaluations: first.value.evaluations,
				converged: first.value.converged,
				memory: process.resourceUsage().maxRSS / 1024,
				before: before / 2 ** 20
			})
		);
	});
}

/** 1,000 refits of the demo study to outcomes drawn anew, on one thread. */
async function bootstrap(model) {
	await withModules(async (load) => {
		const { fitPrepared } = await load('src/lib/stats/fit/fit-model.ts');
		const { prepareModel, withOutcome } = await load('src/lib/stats/fit/prepare-model.ts');
		const design = study({ ...demo, exact: false });
		const prepared = prepareModel(design, models[model]);
		const fit = fitPrepared(prepared, { method: 'reml' });
		const { normal } = chance(7);
		const start = Float64Array.from(fit.working);
		const spread = Math.sqrt(fit.scale);
		const { seconds: used } = seconds(() => {
			for (let b = 0; b < 1000; b++) {
				const y = design.y.slice();
				for (let s = 0; s + 1 < design.subjectStart.length; s++) {
					const shift = spread * normal();
					for (let i = design.subjectStart[s]; i < design.subjectStart[s + 1]; i++)
						y[i] += shift + spread * normal();
				}
				fitPrepared(withOutcome(prepared, y), { method: 'reml', start, tolerance: 1e-4 });
			}
		});
		console.log(JSON.stringify({ rows: design.n, seconds: used }));
	});
}

const self = fileURLToPath(import.meta.url);
const child = (...args) => {
	const { stdout, stderr } = spawnSync(process.execPath, [self, ...args], {
		encoding: 'utf8',
		maxBuffer: 1e8
	});
	const line = stdout.trim().split('\n').at(-1);
	try {
		return JSON.parse(line);
	} catch {
		throw new Error(stderr || stdout);
	}
};

const [what, which] = process.argv.slice(2);
if (what === 'line') await one(Number(which));
else if (what === 'bootstrap') await bootstrap(which);
else {
	console.log(`${cpus()[0]?.model}, ${cpus().length} processors, one thread\n`);
	console.log(
		`${'model'.padEnd(26)}${'rows'.padStart(9)}  ${'with'.padEnd(14)}${'first'.padStart(9)}${'warm'.padStart(9)}${'asked'.padStart(8)}${'evals'.padStart(7)}${'MB'.padStart(7)}`
	);
	lines.forEach(([model, , rule, asked], index) => {
		if (which && !String(index).match(which)) return;
		const r = child('line', String(index));
		console.log(
			`${model.padEnd(26)}${String(r.rows).padStart(9)}  ${(rule ?? '').padEnd(14)}${r.cold.toFixed(3).padStart(9)}${r.warm.toFixed(3).padStart(9)}${(asked === null ? '' : String(asked)).padStart(8)}${String(r.evaluations).padStart(7)}${r.memory.toFixed(0).padStart(7)}${r.converged ? '' : '  not converged'}`
		);
	});
	console.log(
		'\n1,000 refits of the demo study (240 subjects, 9 visits), one thread, from the fit:'
	);
	for (const model of refits) {
		const r = child('bootstrap', model);
		console.log(`${model.padEnd(26)}${String(r.rows).padStart(9)}  ${r.seconds.toFixed(2)} s`);
	}
}
process.exit(0);
