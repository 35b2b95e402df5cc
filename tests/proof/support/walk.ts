import { execFileSync } from 'node:child_process';
import { join } from 'node:path';
import { root } from '../../../scripts/lib/places.mjs';
import { testBuild } from '../../../scripts/lib/test-cluster.mjs';
import type { FreshDatabase } from '../../support/database';
import type { Twin } from './twin';

interface Route {
	id: string;
	params: string[];
	page: boolean;
	methods: string[];
}

/** Every route of the build that answers GET, from the framework's own manifest. */
export function readingRoutes(database: FreshDatabase): Route[] {
	const printed = execFileSync(
		process.execPath,
		[join(root, 'tests/support/list-routes.mjs'), join(root, testBuild.kitDir)],
		{ encoding: 'utf8', env: { ...process.env, ...database.env, ORIGIN: 'http://127.0.0.1:1' } }
	);
	return (JSON.parse(printed) as Route[]).filter(({ methods }) => methods.includes('GET'));
}

/** What may stand for a parameter, from the database; both twins have the same. */
export async function fillings(
	db: FreshDatabase,
	twin: Twin
): Promise<(route: Route, param: string) => string[]> {
	const idsOf = async (query: string) =>
		((await db.sql(query))[0] ?? []).map((row) => row.id as string);
	const visits = await idsOf(
		`(select distinct on (site_id, status, kept) id from (
			select v.id, v.site_id, v.status, (select count(*) from app.measurement m where m.visit_id = v.id) as kept from app.visit v) w
			order by site_id, status, kept, id)
		union select visit_id from app.appointment union select visit_id from app.contact_attempt order by 1`
	);
	const found: Record<string, string[]> = {
		study: [twin.studyId],
		subject: await idsOf('select id from app.subject order by id'),
		visit: visits,
		measure: await idsOf('select id from app.measure order by id'),
		screening: await idsOf(
			`(select id from app.screening where outcome <> 'entered' union (select id from app.screening order by id limit 3)) order by 1`
		),
		person: await idsOf(`select id from app.person where kind = 'person' order by id`),
		job: await idsOf('select id from app.job_run order by id'),
		cut: await idsOf('select id from app.cut order by id'),
		look: await idsOf('select id from app.look order by id'),
		report: await idsOf('select id from app.report order by id'),
		release: await idsOf('select id from app.release order by id'),
		batch: await idsOf('select id from app.import_batch order by id'),
		signature: await idsOf('select id from app.signature order by id'),
		delivery: await idsOf('select id from app.kit_delivery order by id'),
		print: await idsOf('select id from app.code_print order by id'),
		consent: await idsOf(
			`(select consent_id as id from app.upload) union (select id from app.consent order by id limit 2) order by 1`
		),
		site: await idsOf('select id from app.site order by id'),
		scan: await idsOf('select id from app.upload order by id')
	};
	return (route, param) => {
		if (param === 'token')
			return route.id.startsWith('/calendar/')
				? twin.feedTokens
				: ['no-such-token-0123456789abcdef'];
		// The second study's own pages and subjects; what hangs deeper is the same in kind.
		if (param === 'study')
			return route.params.every((each) => each === 'study' || each === 'subject')
				? [twin.studyId, twin.minimisedStudyId]
				: [twin.studyId];
		// The study's measures at one visit are enough: the form of the others shows them too.
		return param === 'measure' ? (found.measure ?? []).slice(0, 6) : (found[param] ?? []);
	};
}

/** Every address of a route; the parameters filled in all ways. */
export function addressesOf(
	route: Route,
	filling: (route: Route, param: string) => string[]
): string[] {
	const path = route.id.replace(/\/\([^)]+\)/g, '') || '/';
	let addresses = [path];
	for (const param of route.params) {
		const values = filling(route, param);
		const few = route.params.includes('measure') && param === 'visit' ? values.slice(0, 3) : values;
		addresses = addresses.flatMap((address) =>
			few.map((value) => address.replace(new RegExp(`\\[${param}(=[a-z]+)?\\]`), value))
		);
	}
	if (!route.page) return addresses;
	return addresses.flatMap((address) => [address, `${address === '/' ? '' : address}/__data.json`]);
}

/** What lists and questions are asked besides, by route: another order, another page, another view. */
export async function questions(db: FreshDatabase): Promise<Record<string, string[]>> {
	const [[one]] = (await db.sql(
		`select (select id from app.subject order by id limit 1) as subject,
			(select id from app.measurement order by id limit 1) as measurement,
			(select happened_on::text from app.visit where happened_on is not null order by id limit 1) as day`
	)) as [{ subject: string; measurement: string; day: string }[]];
	if (!one) throw new Error('There is nothing to ask about');
	const history = [
		`?record=subject&id=${one.subject}`,
		`?record=contact_details&id=${one.subject}`,
		`?record=measurement&id=${one.measurement}`
	];
	return {
		'/(app)/studies/[study=id]/windows': ['?what=ahead', '?what=passed', '?what=open'],
		'/api/studies/[study=id]/windows': [
			'?what=ahead',
			'?what=passed&limit=2',
			'?what=due&text=month'
		],
		'/(app)/studies/[study=id]/subjects': ['?sort=enrolled&order=down'],
		'/api/studies/[study=id]/subjects': ['?limit=3', '?sort=enrolled&order=down', '?search=00'],
		'/(app)/studies/[study=id]/audit': ['?record=subject', '?record=report'],
		'/api/studies/[study=id]/audit': ['?limit=20', '?record=release', '?record=job_run'],
		'/(app)/studies/[study=id]/history': history,
		'/api/studies/[study=id]/history': history,
		'/api/studies/[study=id]/visits/[visit=id]/free-times': [`?date=${one.day}`],
		'/(app)/people/access.csv': [`?on=${one.day}`]
	};
}
