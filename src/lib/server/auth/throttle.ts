import { RateLimiterPostgres, RateLimiterRes } from 'rate-limiter-flexible';
import { Refusal } from '$lib/refusal';
import { database } from '../db/db';

/** Five wrong tries for an account, a hundred from an address, then a quarter of an hour's rest (R-21: 5 to 10, never over 100). */
const rules = {
	account: { points: 5, duration: 15 * 60 },
	address: { points: 100, duration: 15 * 60 },
	/** Mails with a reset link to one address. */
	reset: { points: 3, duration: 60 * 60 },
	/** Whole exports by one person. */
	export: { points: 30, duration: 15 * 60 },
	/** Arms one person may ask to be shown. An emergency concerns one subject; a second and third may follow. */
	unmask: { points: 6, duration: 60 * 60 },
	/** Sealed codes entered by one person. */
	code: { points: 5, duration: 15 * 60 }
} as const;
type Rule = keyof typeof rules;

const limiters = new Map<object, Record<Rule, RateLimiterPostgres>>();

function limiter(rule: Rule): RateLimiterPostgres {
	const { pool } = database();
	let made = limiters.get(pool);
	if (!made) {
		const make = (keyPrefix: Rule) =>
			new RateLimiterPostgres({
				storeClient: pool,
				storeType: 'pool',
				schemaName: 'app',
				tableName: 'rate_limit',
				tableCreated: true,
				keyPrefix,
				...rules[keyPrefix]
			});
		made = {
			account: make('account'),
			address: make('address'),
			reset: make('reset'),
			export: make('export'),
			unmask: make('unmask'),
			code: make('code')
		};
		limiters.set(pool, made);
	}
	return made[rule];
}

/** Counts a try; the one too many is refused. */
export async function countTry(rule: Rule, key: string): Promise<void> {
	try {
		await limiter(rule).consume(key.slice(0, 200));
	} catch (reason) {
		if (reason instanceof RateLimiterRes)
			throw new Refusal('THROTTLED', { minutes: Math.ceil(reason.msBeforeNext / 60_000) });
		throw reason;
	}
}

export async function forgiveTries(rule: Rule, key: string): Promise<void> {
	await limiter(rule).delete(key.slice(0, 200));
}
