import { openApi } from '$lib/server/api/openapi';

const modules = import.meta.glob<Record<string, unknown>>('../**/+server.ts');
let made: Promise<ReturnType<typeof openApi>> | undefined;

async function build() {
	const loaded = await Promise.all(
		Object.entries(modules)
			.filter(([file]) => !file.includes('openapi.json'))
			.map(
				async ([file, load]) =>
					[`/routes/api/${file.replace(/^\.\.\//, '')}`, await load()] as const
			)
	);
	return openApi(Object.fromEntries(loaded));
}

export const GET = async () => Response.json(await (made ??= build()));
