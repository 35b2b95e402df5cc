import { z } from 'zod';
import { Refusal } from '$lib/refusal';
import type { StudyDefinition } from '../study/definition';
import { enrolInput, type EnrolInput, type EligibilityInput } from './subject.input';

/**
 * Forms whose fields the study's definition names. They are flat, so that they work without JavaScript; the command
 * checks what they hold against the definition, and its answers come back under the form's own names.
 */
type Asked = Pick<StudyDefinition, 'eligibility' | 'strata' | 'characteristics'>;
type Flat = Record<string, unknown>;

const text = z.string().trim().max(200, 'At most 200 characters.').default('');
const version = z.coerce.number().int().min(1).max(1_000_000_000);

const shapeOf = (keys: string[]) => Object.fromEntries(keys.map((key) => [key, text]));

export const eligibilityForm = (definition: Pick<Asked, 'eligibility'>) =>
	z.object({
		...shapeOf(definition.eligibility.map((each) => `answer_${each.key}`)),
		version
	});

export function answersFrom(data: Flat): EligibilityInput {
	const answers: EligibilityInput['answers'] = {};
	for (const [name, value] of Object.entries(data))
		if (name.startsWith('answer_') && (value === 'yes' || value === 'no'))
			answers[name.slice('answer_'.length)] = value;
	return { answers };
}

export const enrolForm = (definition: Pick<Asked, 'strata' | 'characteristics'>) =>
	z.object({
		enrolledOn: text,
		...shapeOf(definition.strata.map((each) => `stratum_${each.key}`)),
		...shapeOf(definition.characteristics.map((each) => `characteristic_${each.key}`)),
		contact_name: text,
		contact_email: text,
		contact_phone: text,
		contact_language: z.string().max(2).default('en'),
		version
	});

/** To correct a subject's levels. */
export const stratumForm = (factors: readonly { key: string }[]) =>
	z.object({
		...shapeOf(factors.map((each) => `stratum_${each.key}`)),
		reason: z
			.string()
			.trim()
			.min(1, 'Say why.')
			.max(500, 'Use at most 500 characters.')
			.default(''),
		version
	});

export const stratumFrom = (data: Flat): { stratum: Record<string, string>; reason: string } => ({
	stratum: part(data, 'stratum_'),
	reason: String(data.reason)
});

const part = (data: Flat, prefix: string): Record<string, string> =>
	Object.fromEntries(
		Object.entries(data).flatMap(([name, value]) =>
			name.startsWith(prefix) && typeof value === 'string' && value !== ''
				? [[name.slice(prefix.length), value]]
				: []
		)
	);

/** The command's input; a schema's objections come back under the form's names. */
export function enrolmentFrom(data: Flat): EnrolInput {
	const { language, ...contact } = part(data, 'contact_');
	const read = enrolInput.safeParse({
		enrolledOn: data.enrolledOn,
		stratum: part(data, 'stratum_'),
		characteristics: part(data, 'characteristic_'),
		contact: Object.keys(contact).length === 0 ? null : { name: '', ...contact, language }
	});
	if (read.success) return read.data;
	const fields: Record<string, string> = {};
	for (const issue of read.error.issues) fields[issue.path.join('.')] ??= issue.message;
	throw new Refusal('INVALID', {}, fields);
}

const prefixes: Record<string, string> = {
	stratum: 'stratum_',
	characteristics: 'characteristic_',
	contact: 'contact_',
	answers: 'answer_'
};

/** Runs the command; what it says of 'stratum.sex' goes beside the field 'stratum_sex'. */
export async function besideFields<T>(work: () => Promise<T>): Promise<T> {
	try {
		return await work();
	} catch (thrown) {
		if (!(thrown instanceof Refusal)) throw thrown;
		const fields = Object.fromEntries(
			Object.entries(thrown.fields).map(([path, sentence]) => {
				const [head = '', ...rest] = path.split('.');
				const prefix = prefixes[head];
				return [prefix && rest.length > 0 ? `${prefix}${rest.join('.')}` : path, sentence];
			})
		);
		throw new Refusal(thrown.code, thrown.facts, fields);
	}
}
