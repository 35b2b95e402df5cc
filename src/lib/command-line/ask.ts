import { createInterface, type Interface } from 'node:readline';
import { Writable } from 'node:stream';

/** Asks on the terminal; what is typed as a secret is not shown. Without a terminal each answer is a line of the input. */
export function asker(): {
	ask(question: string, secret?: boolean): Promise<string>;
	close(): void;
} {
	let hidden = false;
	const output = new Writable({
		write(text, _, done) {
			if (!hidden) process.stderr.write(text);
			done();
		}
	});
	const terminal = Boolean(process.stdin.isTTY);
	const lines: Interface = createInterface({ input: process.stdin, output, terminal });
	const waiting: ((line: string) => void)[] = [];
	const given: string[] = [];
	let over = false;
	lines.on('line', (line) => {
		const next = waiting.shift();
		if (next) next(line);
		else given.push(line);
	});
	lines.on('close', () => {
		over = true;
		for (const next of waiting.splice(0)) next('');
	});
	return {
		async ask(question, secret = false) {
			process.stderr.write(question);
			hidden = secret;
			const answer =
				given.shift() ??
				(over ? '' : await new Promise<string>((resolve) => waiting.push(resolve)));
			hidden = false;
			if (secret) process.stderr.write('\n');
			return answer;
		},
		close: () => lines.close()
	};
}
