import pino from 'pino';

/** Structured lines with a request id; never a value of a subject, an address or a secret. */
export const log = pino({
	level: process.env.LOG_LEVEL || 'info',
	base: undefined,
	timestamp: pino.stdTimeFunctions.isoTime,
	redact: {
		paths: [
			'password',
			'token',
			'cookie',
			'authorization',
			'*.password',
			'*.token',
			'*.email',
			'email'
		],
		censor: '[kept out]'
	}
});
