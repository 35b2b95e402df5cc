import { relative } from 'node:path';
import { root } from './places.mjs';
import { describe, plain, record } from './results.mjs';

const file = process.env.HEDDLE_RESULTS ?? '';

/** Prints failures as they come and records every result. */
export default class Reporter {
	/** @param {import('@playwright/test/reporter').TestCase} test @param {import('@playwright/test/reporter').TestResult} result */
	onTestEnd(test, result) {
		const [, project = 'e2e', , ...titles] = test.titlePath();
		const failed = test.outcome() === 'unexpected' || test.outcome() === 'flaky';
		this.#keep({
			phase: project,
			file: relative(root, test.location.file),
			title: titles.join(' › '),
			status: result.status === 'skipped' ? 'skipped' : failed ? 'failed' : 'passed',
			ms: result.duration,
			error:
				result.errors
					.map((error) =>
						plain([error.message ?? error.value, error.snippet].filter(Boolean).join('\n'))
					)
					.join('\n') || (result.status === 'skipped' ? 'It was skipped.' : undefined)
		});
	}

	/** @param {import('@playwright/test/reporter').TestError} error */
	onError(error) {
		this.#keep({
			phase: 'browser',
			file: error.location ? relative(root, error.location.file) : '',
			title: 'an error outside any test',
			status: 'failed',
			ms: 0,
			error: plain(error.message ?? String(error.value))
		});
	}

	/** @param {import('./results.mjs').Result} result */
	#keep(result) {
		if (file) record(file, result);
		if (result.status !== 'passed') process.stdout.write(describe(result) + '\n');
	}

	printsToStdio() {
		return true;
	}
}
