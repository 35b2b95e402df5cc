import { z } from 'zod';

/**
 * What the environment says, checked once, at first use: nothing is read while a module loads, so that the
 * same code serves the web server, the command-line programs, tests and the build.
 */

export class ConfigError extends Error {}

const postgresUrl = z.string().regex(/^postgres(ql)?:\/\//, 'must be a postgres:// address');
const httpUrl = z.url({ protocol: /^https?$/, error: 'must be an http:// or https:// address' });
const key = z.string().transform((text, context) => {
	const bytes = Buffer.from(text, 'base64');
	if (bytes.length === 32) return bytes;
	context.addIssue({
		code: 'custom',
		message: 'must be 32 bytes in base64 (openssl rand -base64 32)'
	});
	return z.NEVER;
});
const origin = httpUrl
	.transform((text) => new URL(text))
	.refine((url) => url.pathname === '/' && !url.search, 'must have no path')
	.transform((url) => url.origin);

const general = z
	.object({
		DATABASE_URL: postgresUrl,
		ORIGIN: origin,
		AUTH_SECRET: z.string().min(32, 'must have 32 characters or more'),
		HEDDLE_KEY: key,
		SMTP_URL: z
			.string()
			.regex(/^smtps?:\/\//, 'must be an smtp:// or smtps:// address')
			.optional(),
		MAIL_FROM: z.string().min(3).optional(),
		OIDC_ISSUER: httpUrl.optional(),
		OIDC_CLIENT_ID: z.string().optional(),
		OIDC_CLIENT_SECRET: z.string().optional(),
		STORAGE_DIR: z.string().optional(),
		CLOSED_STORAGE_DIR: z.string().optional(),
		S3_ENDPOINT: httpUrl.optional(),
		S3_BUCKET: z.string().optional(),
		S3_REGION: z.string().default('us-east-1'),
		S3_ACCESS_KEY: z.string().optional(),
		S3_SECRET_KEY: z.string().optional(),
		LOG_LEVEL: z
			.enum(['fatal', 'error', 'warn', 'info', 'debug', 'trace', 'silent'])
			.default('info'),
		IDLE_MINUTES: z.coerce.number().min(1).max(30).default(15),
		TRAINING_BANNER: z.string().max(200).optional()
	})
	.superRefine((env, context) => {
		const need = (name: keyof typeof env, because: string) => {
			if (env[name] === undefined)
				context.addIssue({ code: 'custom', path: [name], message: `is not set, but ${because}` });
		};
		if (env.SMTP_URL) need('MAIL_FROM', 'SMTP_URL is');
		if (env.OIDC_ISSUER) {
			need('OIDC_CLIENT_ID', 'OIDC_ISSUER is');
			need('OIDC_CLIENT_SECRET', 'OIDC_ISSUER is');
		}
		if (env.S3_BUCKET) {
			need('S3_ACCESS_KEY', 'S3_BUCKET is');
			need('S3_SECRET_KEY', 'S3_BUCKET is');
		} else need('STORAGE_DIR', 'neither is S3_BUCKET');
	})
	.transform((env) => ({
		databaseUrl: env.DATABASE_URL,
		origin: env.ORIGIN,
		secure: env.ORIGIN.startsWith('https:'),
		authSecret: env.AUTH_SECRET,
		key: env.HEDDLE_KEY,
		/** Absent: mail stays in the queue, and the administrator's page says so. */
		mail: env.SMTP_URL ? { smtpUrl: env.SMTP_URL, from: env.MAIL_FROM ?? '' } : null,
		oidc: env.OIDC_ISSUER
			? {
					issuer: env.OIDC_ISSUER,
					clientId: env.OIDC_CLIENT_ID ?? '',
					clientSecret: env.OIDC_CLIENT_SECRET ?? ''
				}
			: null,
		storage: env.S3_BUCKET
			? {
					kind: 's3' as const,
					endpoint: env.S3_ENDPOINT,
					bucket: env.S3_BUCKET,
					region: env.S3_REGION,
					accessKey: env.S3_ACCESS_KEY ?? '',
					secretKey: env.S3_SECRET_KEY ?? ''
				}
			: { kind: 'folder' as const, folder: env.STORAGE_DIR ?? '' },
		/** Holds ciphertext only; the keys stand in the closed schema. */
		closedFolder: env.CLOSED_STORAGE_DIR ?? null,
		logLevel: env.LOG_LEVEL,
		idleMinutes: env.IDLE_MINUTES,
		trainingBanner: env.TRAINING_BANNER ?? null
	}));

/** Only the look worker's environment holds these. */
const closed = z
	.object({ DATABASE_UNMASKED_URL: postgresUrl, CLOSED_KEY: key, CLOSED_STORAGE_DIR: z.string() })
	.transform((env) => ({
		databaseUrl: env.DATABASE_UNMASKED_URL,
		key: env.CLOSED_KEY,
		folder: env.CLOSED_STORAGE_DIR
	}));

/** Only the migration program's environment holds this. */
const migration = z
	.object({ DATABASE_OWNER_URL: postgresUrl })
	.transform((env) => ({ ownerUrl: env.DATABASE_OWNER_URL }));

export type Config = z.output<typeof general>;
export type ClosedConfig = z.output<typeof closed>;

type Environment = Record<string, string | undefined>;

function read<T extends z.ZodType>(schema: T, env: Environment): z.output<T> {
	// An empty variable is a variable that is not set: that is how env files leave one out.
	const given = Object.fromEntries(Object.entries(env).filter(([, value]) => value !== ''));
	const result = schema.safeParse(given);
	if (result.success) return result.data;
	const lines = result.error.issues.map((issue) => {
		const name = issue.path.join('.');
		const unset = given[name] === undefined && issue.code === 'invalid_type';
		return `${name} ${unset ? 'is not set' : issue.message}`;
	});
	throw new ConfigError(`The environment is not complete: ${lines.join('; ')}.`);
}

export const readConfig = (env: Environment): Config => read(general, env);
export const readClosedConfig = (env: Environment): ClosedConfig => read(closed, env);

let general_: Config | undefined;
let closed_: ClosedConfig | undefined;

export const config = (): Config => (general_ ??= readConfig(process.env));
export const closedConfig = (): ClosedConfig => (closed_ ??= readClosedConfig(process.env));
export const migrationConfig = () => read(migration, process.env);
