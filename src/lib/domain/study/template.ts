import type { z } from 'zod';
import { problem, type Problem } from '../problems';
import { studyDefinition, type StudyDefinition } from './definition';

/** Where in the file, as people would say it: 'visits[2].target.amount'. */
export type LocatedProblem = { path: string; problem: Problem };

export type ReadDefinition =
	{ ok: true; definition: StudyDefinition } | { ok: false; problems: LocatedProblem[] };

const mostProblems = 200;

export function pathText(path: readonly PropertyKey[]): string {
	let text = '';
	for (const step of path) {
		if (typeof step === 'number') text += `[${step}]`;
		else text += text === '' ? String(step) : `.${String(step)}`;
	}
	return text;
}

type Issue = z.core.$ZodIssue;

const kinds: Record<string, string> = {
	string: 'text',
	number: 'a number',
	boolean: 'true or false',
	array: 'a list',
	object: 'a group of fields',
	record: 'a group of fields',
	int: 'a whole number'
};

function sentence(issue: Issue): string {
	switch (issue.code) {
		case 'invalid_type':
			return `This must be ${kinds[issue.expected] ?? issue.expected}.`;
		case 'invalid_value':
			return `This must be one of: ${issue.values.map(String).join(', ')}.`;
		case 'too_small':
			return issue.origin === 'array' ? `At least ${issue.minimum} needed here.` : issue.message;
		case 'too_big':
			return issue.origin === 'array' ? `At most ${issue.maximum} allowed here.` : issue.message;
		case 'invalid_union':
			return 'The kind given here is not known.';
		case 'invalid_key':
			return 'Use lower-case letters, digits and single hyphens in the key.';
		default:
			return issue.message;
	}
}

function located(issue: Issue): LocatedProblem[] {
	const path = pathText(issue.path);
	if (issue.code === 'unrecognized_keys')
		return issue.keys.map((name) => ({ path, problem: problem('FIELD_UNKNOWN', { name }) }));
	if (issue.code === 'invalid_type' && issue.input === undefined)
		return [{ path, problem: problem('FIELD_MISSING') }];
	return [{ path, problem: problem('FIELD_WRONG', { detail: sentence(issue) }) }];
}

/** The definition an object holds, or what is wrong with it, field by field. */
export function readDefinition(value: unknown): ReadDefinition {
	const parsed = studyDefinition.safeParse(value, { reportInput: true });
	if (parsed.success) return { ok: true, definition: parsed.data };
	return { ok: false, problems: parsed.error.issues.flatMap(located).slice(0, mostProblems) };
}

/** The definition a template file holds, or what is wrong with it. Reads only: see `check.ts` for the study's sense. */
export function readTemplate(text: string): ReadDefinition {
	let value: unknown;
	try {
		value = JSON.parse(text.replace(/^\uFEFF/, ''));
	} catch (error) {
		const detail = error instanceof Error ? error.message : 'not JSON';
		return { ok: false, problems: [{ path: '', problem: problem('FILE_NOT_JSON', { detail }) }] };
	}
	// Names the schema for editors; it is no part of the study.
	if (typeof value === 'object' && value !== null && '$schema' in value) {
		const { $schema: _, ...rest } = value;
		value = rest;
	}
	return readDefinition(value);
}
