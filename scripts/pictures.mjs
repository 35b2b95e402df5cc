// `npm run pictures`: a picture of every screen for every role, and of every report page, into pictures/.
import { mkdirSync, readdirSync, rmSync, writeFileSync } from 'node:fs';
import { dirname, join } from 'node:path';
import { root } from './lib/places.mjs';
import { run, say } from './lib/say.mjs';
import { runPlaywright, testFiles, testRun } from './lib/test-run.mjs';

/** @param {string} text */
const escape = (text) => text.replace(/[&<>"]/g, (sign) => `&#${sign.charCodeAt(0)};`);

await run(async () => {
	const place = join(root, 'pictures');
	const files = testFiles('tests/pictures', /^[^/]+\.ts$/);
	const at = process.argv.indexOf('--filter');
	const filter = at > 0 ? (process.argv[at + 1] ?? null) : null;
	if (filter === null) rmSync(place, { recursive: true, force: true });
	mkdirSync(place, { recursive: true });
	const status = await testRun(
		{ name: 'pictures', title: 'A picture run', withDemo: true, filter },
		(tests) => tests.phase('pictures', () => runPlaywright(tests, 'pictures', files))
	);
	writeIndex(place);
	say(`Look at ${join('pictures', 'index.html')}`);
	return status;
});

/** @param {string} place */
function writeIndex(place) {
	const pictures = readdirSync(place, { recursive: true })
		.map(String)
		.filter((name) => name.endsWith('.png'))
		.sort();
	/** @type {Map<string, string[]>} */
	const groups = new Map();
	for (const name of pictures) {
		const group = dirname(name) === '.' ? 'All' : dirname(name);
		groups.set(group, [...(groups.get(group) ?? []), name]);
	}
	const sections = [...groups].map(
		([group, names]) =>
			`<h2 id="${escape(group)}">${escape(group)}</h2><div>${names
				.map(
					(name) =>
						`<figure><a href="${encodeURI(name)}"><img loading="lazy" src="${encodeURI(name)}" alt=""></a><figcaption>${escape(name)}</figcaption></figure>`
				)
				.join('')}</div>`
	);
	const list = [...groups.keys()]
		.map((group) => `<a href="#${encodeURIComponent(group)}">${escape(group)}</a>`)
		.join(' · ');
	writeFileSync(
		join(place, 'index.html'),
		`<!doctype html><html lang="en"><meta charset="utf-8"><title>${pictures.length} pictures</title><style>body{font:16px system-ui;margin:2rem}div{display:flex;flex-wrap:wrap;gap:1rem}figure{margin:0;width:24rem}img{width:100%;border:1px solid #8888}</style><h1>${pictures.length} pictures</h1><p>${list}</p>${sections.join('')}</html>\n`
	);
}
