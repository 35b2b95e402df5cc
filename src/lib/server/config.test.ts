import { describe, expect, it } from 'vitest';
import { ConfigError, readClosedConfig, readConfig } from './config';

const key = Buffer.alloc(32, 7).toString('base64');
const whole = {
	DATABASE_URL: 'postgres://heddle_app:x@db/heddle',
	ORIGIN: 'https://heddle.example/',
	AUTH_SECRET: 'a'.repeat(32),
	HEDDLE_KEY: key,
	STORAGE_DIR: '/srv/files'
};

const complaint = (change: Record<string, string | undefined>) => {
	try {
		readConfig({ ...whole, ...change });
	} catch (error) {
		expect(error).toBeInstanceOf(ConfigError);
		return (error as Error).message;
	}
	throw new Error('accepted');
};

describe('the configuration', () => {
	it('is read from the smallest complete environment, with the usual values for the rest', () => {
		const config = readConfig(whole);
		expect(config).toMatchObject({
			origin: 'https://heddle.example',
			secure: true,
			mail: null,
			oidc: null,
			storage: { kind: 'folder', folder: '/srv/files' },
			logLevel: 'info',
			idleMinutes: 15,
			trainingBanner: null
		});
		expect(config.key).toHaveLength(32);
	});

	it('names the variable that is missing or wrong', () => {
		expect(complaint({ DATABASE_URL: undefined })).toContain('DATABASE_URL is not set');
		expect(complaint({ AUTH_SECRET: '' })).toContain('AUTH_SECRET is not set');
		expect(complaint({ HEDDLE_KEY: 'c2hvcnQ=' })).toContain('HEDDLE_KEY must be 32 bytes');
		expect(complaint({ ORIGIN: 'heddle.example' })).toContain('ORIGIN must be an http');
		expect(complaint({ ORIGIN: 'https://heddle.example/app' })).toContain(
			'ORIGIN must have no path'
		);
		expect(complaint({ STORAGE_DIR: undefined })).toContain('STORAGE_DIR is not set');
		expect(complaint({ S3_BUCKET: 'b' })).toContain('S3_ACCESS_KEY is not set');
		expect(complaint({ SMTP_URL: 'smtp://mail:25' })).toContain('MAIL_FROM is not set');
		expect(complaint({ OIDC_ISSUER: 'https://id.example' })).toContain('OIDC_CLIENT_ID is not set');
		expect(complaint({ IDLE_MINUTES: 'long' })).toContain('IDLE_MINUTES');
	});

	it('never repeats a value in its complaint', () => {
		expect(complaint({ HEDDLE_KEY: 'not-a-key-but-secret' })).not.toContain('secret');
		expect(complaint({ DATABASE_URL: 'mysql://u:hunter2@h/d' })).not.toContain('hunter2');
	});

	it('keeps what is closed apart: the general part has no such field', () => {
		const env = {
			...whole,
			DATABASE_UNMASKED_URL: 'postgres://u@h/d',
			CLOSED_KEY: key,
			CLOSED_STORAGE_DIR: '/c'
		};
		expect(JSON.stringify(readConfig(env))).not.toContain('postgres://u@h/d');
		expect(readClosedConfig(env).folder).toBe('/c');
		expect(() => readClosedConfig(whole)).toThrow('DATABASE_UNMASKED_URL is not set');
	});
});
