// Test results as they come: one JSON line each, written by the reporters and read by the test script.
import { appendFileSync, existsSync, readFileSync } from 'node:fs';

/**
 * @typedef {object} Result
 * @property {string} phase
 * @property {string} file
 * @property {string} title
 * @property {'passed' | 'failed' | 'skipped'} status
 * @property {number} ms
 * @property {string} [error]
 */

/** @param {string} path @param {Result} result */
export const record = (path, result) => appendFileSync(path, JSON.stringify(result) + '\n');

/** @param {string} path @returns {Result[]} */
export function readResults(path) {
	if (!existsSync(path)) return [];
	return readFileSync(path, 'utf8')
		.split('\n')
		.filter(Boolean)
		.map((line) => JSON.parse(line));
}

/** A failure as a person reads it. @param {Result} result */
export function describe({ phase, file, title, error }) {
	const body = (error ?? '')
		.split('\n')
		.slice(0, 25)
		.map((line) => `      ${line}`);
	return [`  ✗ ${phase}  ${file}  ${title}`, ...body].join('\n');
}

/**
 * What counts at the end. A skipped test is a failure unless tests were picked by name: a test that does not
 * run proves nothing.
 * @param {Result[]} results
 * @param {boolean} picked
 */
export function tally(results, picked) {
	const passed = results.filter(({ status }) => status === 'passed').length;
	const failed = results.filter(
		({ status }) => status === 'failed' || (status === 'skipped' && !picked)
	).length;
	return { passed, failed, line: `${passed} passed, ${failed} failed` };
}

/** Terminal colours out. @param {string} text */
// eslint-disable-next-line no-control-regex
export const plain = (text) => text.replace(/\u001b\[[0-9;]*m/g, '');
