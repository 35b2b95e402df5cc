// The PDF of a look of the size of a printed report: made from its facts, and drawn.
import { withModules } from './support/load.mjs';
import { measure } from './support/measure.mjs';

await withModules(async (load) => {
	const { lookReport } = await load('src/lib/report/index.ts');
	const { renderReport } = await load('src/lib/server/pdf/render.ts');
	const { lookInput } = await load('tests/unit/pdf-fixture.ts');
	let bytes = 0;
	await measure('PDF of a look', 20, async () => {
		const pdf = await renderReport(lookReport(lookInput()), {
			createdAt: new Date('2026-06-09T09:00:00Z')
		});
		bytes = pdf.length;
	});
	console.log(`(${(bytes / 1000).toFixed(0)} kB)`);
});
process.exit(0);
