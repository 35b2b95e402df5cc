import { Refusal } from '$lib/refusal';

/** The form has one field for all records: a refusal about one of them stands beside it. */
export async function besideFields<T>(work: () => Promise<T>): Promise<T> {
	try {
		return await work();
	} catch (refused) {
		if (!(refused instanceof Refusal)) throw refused;
		const fields = Object.entries(refused.fields).filter(([path]) => !path.startsWith('items.'));
		throw new Refusal(refused.code, refused.facts, Object.fromEntries(fields));
	}
}
