import { readFileSync } from 'node:fs';
import { StatsError } from '$lib/stats';

/** What a program of the statistics says: `output` for standard output, `complaint` for standard error. */
export interface Said {
	status: number;
	output: string;
	complaint: string;
}

/** A complaint of one sentence. */
class BadInput extends Error {}

/** The arguments of a program that takes a plan and nothing else. */
function planArguments(name: string, args: readonly string[]): { path: string; table: boolean } {
	const usage = `Use it like this: heddle ${name} --plan plan.json [--table]`;
	let path: string | null = null;
	let table = false;
	for (let i = 0; i < args.length; i++) {
		const arg = args[i]!;
		if (arg === '--table') table = true;
		else if (arg === '--plan' && args[i + 1] !== undefined) path = args[++i]!;
		else throw new BadInput(`${arg} is not understood here. ${usage}`);
	}
	if (path === null) throw new BadInput(`Name the plan. ${usage}`);
	return { path, table };
}

function jsonIn(path: string): unknown {
	let text: string;
	try {
		text = readFileSync(path, 'utf8');
	} catch {
		throw new BadInput(`The plan ${path} cannot be read.`);
	}
	try {
		return JSON.parse(text.replace(/^\uFEFF/, ''));
	} catch (error) {
		const why = (error as Error).message.replace(/\s+/g, ' ');
		throw new BadInput(`The plan ${path} is not JSON: ${why}.`);
	}
}

/**
 * Runs a program that turns a plan into a result: JSON, or a table when asked for one.
 *
 * Bad input is one sentence and status 1; a fault of the program is thrown.
 */
export async function answerPlan<Result>(
	name: string,
	args: readonly string[],
	answer: (plan: unknown) => Result | Promise<Result>,
	asTable: (result: Result) => string
): Promise<Said> {
	try {
		const { path, table } = planArguments(name, args);
		const result = await answer(jsonIn(path));
		const output = table ? asTable(result) : JSON.stringify(result, null, 2);
		return { status: 0, output: `${output}\n`, complaint: '' };
	} catch (error) {
		if (error instanceof BadInput || error instanceof StatsError)
			return { status: 1, output: '', complaint: `${error.message.replace(/\s+/g, ' ')}\n` };
		throw error;
	}
}

/** Says it and ends with its status. */
export function say({ status, output, complaint }: Said): void {
	process.stderr.write(complaint);
	process.stdout.write(output);
	process.exitCode = status;
}
