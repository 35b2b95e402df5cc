import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { hashPassword } from '../../src/lib/server/auth/password';
import { addPerson, signIn } from '../support/people';
import { startServer, type RunningServer } from '../support/server';

const password = 'linen warp and weft';
let server: RunningServer;
beforeAll(async () => {
	server = await startServer();
	await addPerson(server.database, {
		email: 'vera@example.org',
		name: 'Vera Lind',
		passwordHash: await hashPassword(password)
	});
});
afterAll(() => server?.stop());

describe('sign-in', () => {
	test('the right password opens the start page, and ending the session closes it at once', async () => {
		const visitor = await signIn(server, 'vera@example.org', password);
		expect((await visitor.get('/')).status).toBe(200);
		const other = await signIn(server, 'vera@example.org', password);
		expect((await visitor.send('DELETE', '/api/session')).status).toBe(200);
		expect((await visitor.get('/api/session')).status).toBe(401);
		expect((await other.get('/api/session')).status).toBe(200);
	});

	test('a wrong password and an unknown account get the same answer', async () => {
		const wrong = await signIn(server, 'vera@example.org', 'not the password at all', false);
		const unknown = await signIn(server, 'nobody@example.org', 'not the password at all', false);
		expect(wrong.refusal).toContain('do not fit together');
		expect(unknown.refusal).toBe(wrong.refusal);
	});

	test('a request from another site is not carried out', async () => {
		const visitor = await signIn(server, 'vera@example.org', password);
		const forged = await visitor.send('DELETE', '/api/session', undefined, {
			origin: 'https://elsewhere.example'
		});
		expect(forged.status).toBe(403);
		expect((await visitor.get('/api/session')).status).toBe(200);
	});
});
