import { relative } from 'node:path';
import { root } from './places.mjs';
import { describe, plain, record } from './results.mjs';

const file = process.env.HEDDLE_RESULTS ?? '';
const picked = process.env.HEDDLE_PICKED === '1';

/** Prints failures as they come and records every result. */
export default class Reporter {
	/** @param {import('vitest/node').TestCase} test */
	onTestCaseResult(test) {
		const { state, errors } = test.result();
		if (state === 'pending') return;
		if (state === 'skipped' && picked) return;
		this.#keep({
			phase: test.project.name,
			file: relative(root, test.module.moduleId),
			title: test.fullName,
			status: state,
			ms: Math.round(test.diagnostic()?.duration ?? 0),
			error:
				state === 'skipped'
					? 'It was skipped: a test that does not run proves nothing.'
					: errorText(errors)
		});
	}

	/** A file that cannot be loaded, or whose hooks fail, has errors of its own. @param {import('vitest/node').TestModule} module */
	onTestModuleEnd(module) {
		const own = [
			...module.errors(),
			...[...module.children.allSuites()].flatMap((suite) => [...suite.errors()])
		];
		if (own.length > 0)
			this.#keep({
				phase: module.project.name,
				file: relative(root, module.moduleId),
				title: '(the file itself)',
				status: 'failed',
				ms: 0,
				error: errorText(own)
			});
	}

	/** What a proof counted and timed is to be read. @param {import('vitest').UserConsoleLog} log */
	onUserConsoleLog(log) {
		if (process.env.HEDDLE_FIGURES === '1') process.stdout.write(log.content);
	}

	/** @param {unknown} _modules @param {readonly import('vitest/node').SerializedError[]} errors */
	onTestRunEnd(_modules, errors) {
		for (const error of errors)
			this.#keep({
				phase: 'vitest',
				file: '',
				title: 'an error outside any test',
				status: 'failed',
				ms: 0,
				error: errorText([error])
			});
	}

	/** @param {import('./results.mjs').Result} result */
	#keep(result) {
		if (file) record(file, result);
		if (result.status !== 'passed') process.stdout.write(describe(result) + '\n');
	}
}

/** @param {readonly { message?: string, diff?: string, stack?: string }[] | undefined} errors */
function errorText(errors) {
	if (!errors || errors.length === 0) return undefined;
	return errors
		.map(({ message, diff, stack }) => {
			const where = (stack ?? '')
				.split('\n')
				.find((line) => line.includes(root) && !line.includes('node_modules'));
			return plain([message, diff, where?.trim()].filter(Boolean).join('\n'));
		})
		.join('\n');
}
