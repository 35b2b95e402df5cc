import { execFileSync } from 'node:child_process';
import { mkdirSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { folder, root } from '../../scripts/lib/places.mjs';
import { expect, test } from '../support/browser';
import { accounts, signedIn } from '../support/screens';

/** Who may fetch each kind of report, and whence; the board member's copies are stamped. */
const sources = [
	{
		role: 'trial statistician',
		kind: 'open',
		ids: `select look_id as id, study_id from app.report where kind = 'open'`,
		path: (study: string, id: string) => `/studies/${study}/looks/${id}/report.pdf`
	},
	{
		role: 'independent statistician',
		kind: 'closed',
		ids: `select look_id as id, study_id from app.report where kind = 'closed'`,
		path: (study: string, id: string) => `/studies/${study}/looks/${id}/report.pdf`
	},
	{
		role: 'monitoring board member',
		kind: 'released',
		ids: `select l.report_id as id, l.study_id from app.release l join app.person p on p.id = l.person_id where l.status = 'ready' and p.email = 'board@demo.example'`,
		path: (study: string, id: string) => `/studies/${study}/board/${id}/report.pdf`
	}
];

for (const { role, kind, ids, path } of sources)
	test(`pictures of every page of the ${kind} reports`, async ({ browser, heddle }) => {
		const account = (await accounts(heddle)).find((each) => each.role === role);
		if (!account) throw new Error(`The demo has no ${role}`);
		const [reports = []] = (await heddle.database.sql(ids)) as { id: string; study_id: string }[][];
		expect(reports.length).toBeGreaterThan(0);
		const context = await signedIn(browser, heddle, account);
		const place = folder(join(root, 'pictures', 'reports'), 0o755);
		mkdirSync(place, { recursive: true });
		for (const [at, report] of reports.entries()) {
			const answer = await context.request.get(path(report.study_id, report.id));
			expect(answer.status(), `${kind} report ${at + 1}`).toBe(200);
			const file = join(place, `${kind} ${at + 1}.pdf`);
			writeFileSync(file, await answer.body());
			execFileSync('pdftoppm', ['-r', '80', '-png', file, join(place, `${kind} ${at + 1} page`)]);
		}
		await context.close();
	});
