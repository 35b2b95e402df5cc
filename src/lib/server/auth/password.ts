import { hash, verify } from '@node-rs/argon2';
import { normalisePassword } from '$lib/domain/person/password';

/** Argon2id with OWASP's first-choice memory and time (19 MiB, 2 passes, 1 lane). */
const cost = { memoryCost: 19_456, timeCost: 2, parallelism: 1 };

const normal = normalisePassword;

export const hashPassword = (password: string): Promise<string> => hash(normal(password), cost);

let dummy: Promise<string> | undefined;

/** Whether the password fits. An unknown account takes as long as a known one: a hash is verified either way. */
export async function passwordFits(stored: string | null, password: string): Promise<boolean> {
	dummy ??= hash('no account has this password', cost);
	const fits = await verify(stored ?? (await dummy), normal(password)).catch(() => false);
	return stored !== null && fits;
}
