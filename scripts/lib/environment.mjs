// Each process receives its own part of the environment and nothing of the others'.

const own = {
	app: [
		'DATABASE_URL',
		'ORIGIN',
		'AUTH_SECRET',
		'HEDDLE_KEY',
		'SMTP_URL',
		'MAIL_FROM',
		'OIDC_ISSUER',
		'OIDC_CLIENT_ID',
		'OIDC_CLIENT_SECRET',
		'STORAGE_DIR',
		// Ciphertext only: the web process hands a released copy on, with a key it is given for that one file.
		'CLOSED_STORAGE_DIR',
		'S3_ENDPOINT',
		'S3_BUCKET',
		'S3_REGION',
		'S3_ACCESS_KEY',
		'S3_SECRET_KEY',
		'LOG_LEVEL',
		'IDLE_MINUTES',
		'TRAINING_BANNER'
	],
	owner: ['DATABASE_OWNER_URL'],
	closed: ['DATABASE_UNMASKED_URL', 'CLOSED_KEY'],
	/** Held by the backup commands alone. */
	backup: ['BACKUP_DATABASE_URL', 'RESTORE_DATABASE_URL']
};

/** Everything that may not be handed on without being asked for. */
export const guarded = new Set(Object.values(own).flat());

const parts = {
	web: ['app'],
	worker: ['app'],
	'look-worker': ['app', 'closed'],
	migrate: ['owner'],
	demo: ['app', 'owner', 'closed'],
	admin: ['app'],
	none: []
};

/** @typedef {keyof typeof parts} Kind */

/**
 * @param {Kind} kind
 * @param {Record<string, string | undefined>} all everything known
 * @param {Record<string, string | undefined>} [surroundings]
 * @returns {Record<string, string>}
 */
export function environmentFor(kind, all, surroundings = process.env) {
	/** @type {Record<string, string>} */
	const env = {};
	for (const [name, value] of Object.entries(surroundings))
		if (value !== undefined && !guarded.has(name)) env[name] = value;
	for (const part of parts[kind])
		for (const name of own[/** @type {keyof typeof own} */ (part)]) {
			const value = all[name];
			if (value !== undefined && value !== '') env[name] = value;
		}
	// A file to import may have 50 MB, and somewhat more on its way here.
	if (kind === 'web') env.BODY_SIZE_LIMIT ??= '110M';
	return env;
}
