// Programs that only tests need, from Debian's packages.
import { existsSync } from 'node:fs';
import { works } from './commands.mjs';
import { installPackages } from './debian.mjs';

const needed = [
	{ package: 'chromium', there: () => existsSync(process.env.CHROMIUM ?? '/usr/bin/chromium') },
	{
		package: 'poppler-utils',
		there: () => works('pdftotext', ['-v']) && works('pdftoppm', ['-v'])
	},
	{ package: 'qpdf', there: () => works('qpdf') },
	{
		package: 'python3-icalendar',
		there: () => works('/usr/bin/python3', ['-c', 'import icalendar'])
	}
];

/** @param {(line: string) => void} say */
export async function installCheckers(say) {
	const missing = needed.filter(({ there }) => !there()).map((one) => one.package);
	if (missing.length > 0) await installPackages(missing, { say, why: 'What the tests check with' });
}
