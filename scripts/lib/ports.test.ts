import { mkdtempSync, readFileSync } from 'node:fs';
import { createServer } from 'node:net';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { describe, expect, it } from 'vitest';
import { anyFreePort, choosePorts, isFree, usualPorts } from './ports.mjs';

const newState = () => mkdtempSync(join(tmpdir(), 'heddle-ports-'));
const taken =
	(...ports: number[]) =>
	async (port: number) =>
		!ports.includes(port);

describe('the choice of ports', () => {
	it('takes the usual ones and keeps them for the next start', async () => {
		const state = newState();
		const said: string[] = [];
		const ports = await choosePorts({ state, say: (line) => said.push(line), free: taken() });
		expect(ports).toEqual(usualPorts);
		expect(said).toEqual([]);
		expect(JSON.parse(readFileSync(join(state, 'ports.json'), 'utf8'))).toEqual(ports);
	});

	it('names a taken port, chooses another, and leaves the other parts where they were', async () => {
		const state = newState();
		const said: string[] = [];
		const ports = await choosePorts({
			state,
			say: (line) => said.push(line),
			free: taken(usualPorts.web)
		});
		expect(ports).toEqual({ ...usualPorts, web: usualPorts.oidc + 1 });
		expect(said).toHaveLength(1);
		expect(said[0]).toContain(`Port ${usualPorts.web} (web) is taken`);
		expect(said[0]).toContain('Set PORT');

		const next = await choosePorts({ state, say: (line) => said.push(line), free: taken() });
		expect(next).toEqual(ports);
		expect(said).toHaveLength(1);
	});

	it('guesses nothing when a port was asked for by name', async () => {
		const asked = { state: newState(), say: () => {}, fixed: { web: 9123 } };
		await expect(choosePorts({ ...asked, free: taken(9123) })).rejects.toThrow(
			'Port 9123, asked for the web, is taken'
		);
		expect((await choosePorts({ ...asked, free: taken() })).web).toBe(9123);
	});

	it('begins anew when the kept file is damaged', async () => {
		const state = newState();
		const { writeFileSync } = await import('node:fs');
		writeFileSync(join(state, 'ports.json'), '{"web": 84');
		expect(await choosePorts({ state, say: () => {}, free: taken() })).toEqual(usualPorts);
	});

	it('sees a real listener', async () => {
		const port = await anyFreePort();
		expect(await isFree(port)).toBe(true);
		const server = createServer();
		await new Promise<void>((done) => server.listen(port, '127.0.0.1', done));
		expect(await isFree(port)).toBe(false);
		await new Promise((done) => server.close(done));
	});
});
