// The demo's own program, with its progress made visible.
import { runProgram } from './local.mjs';
import { Trouble, explain, say } from './say.mjs';

/** @param {Record<string, string | undefined>} env @returns {Promise<unknown[]>} the accounts it made */
export async function makeDemo(env) {
	let shown = -1;
	/** @type {unknown[] | null} */
	let accounts = null;
	const { status, output } = await runProgram('demo', ['demo'], env, (line) => {
		const [, share, text] = /^progress ([\d.]+) ?(.*)$/.exec(line) ?? [];
		if (share !== undefined) {
			const percent = Math.floor(Number(share) * 100);
			// A line for each tenth, so that a log of it stays readable.
			if (Math.floor(percent / 10) > Math.floor(shown / 10) || shown < 0) {
				const knots = Math.round(percent / 5);
				say(
					`Demo ${'◆'.repeat(knots)}${'─'.repeat(20 - knots)} ${String(percent).padStart(3)} %  ${text}`
				);
				shown = percent;
			}
		}
		if (line.startsWith('accounts ')) accounts = JSON.parse(line.slice('accounts '.length));
	});
	if (status !== 0 || !accounts) {
		const said = output
			.split('\n')
			.filter((line) => !line.startsWith('progress ') && !line.startsWith('accounts '));
		throw new Trouble(
			explain({ message: output }) ??
				`The demo could not be made:\n${said.join('\n').trim().slice(-3000)}`
		);
	}
	return accounts;
}
