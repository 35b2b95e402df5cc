import { differingFields } from '$lib/domain/study/same';

export type Fields = Record<string, unknown>;

/** Fields that were emptied count as not given. */
export function given(value: unknown): unknown {
	if (typeof value === 'string') return value.trim() === '' ? undefined : value.trim();
	if (value === null || value === undefined) return undefined;
	if (Array.isArray(value)) return value.map(given);
	if (typeof value === 'object')
		return Object.fromEntries(
			Object.entries(value)
				.map(([name, inner]) => [name, given(inner)] as const)
				.filter(([, inner]) => inner !== undefined)
		);
	return value;
}

/**
 * What is typed about one item, beside what is kept of it. When somebody else changes the item, fields that were not
 * touched here follow, and touched ones keep what was typed.
 */
export class ItemForm {
	typed = $state<Fields>({});
	errors = $state.raw<Record<string, string>>({});
	#base = $state.raw<Fields>({});

	constructor(item: Fields) {
		this.#base = item;
		this.typed = structuredClone(item);
	}

	// Getters, not derived values: a form outlives the screen part that made it.
	get now(): Fields {
		return given($state.snapshot(this.typed)) as Fields;
	}
	get touched(): string[] {
		return differingFields(this.#base, this.now);
	}
	get dirty(): boolean {
		return this.touched.length > 0;
	}

	follow(item: Fields): void {
		if (item === this.#base) return;
		const touched = this.touched;
		const mine = $state.snapshot(this.typed) as Fields;
		const next = structuredClone(item);
		for (const field of touched)
			if (mine[field] === undefined) delete next[field];
			else next[field] = mine[field];
		this.#base = item;
		this.typed = next;
	}

	putBack(): void {
		this.typed = structuredClone(this.#base);
		this.errors = {};
	}

	/** The touched fields with what they are to be; null where one was emptied. */
	changes(): Fields {
		const { now } = this;
		return Object.fromEntries(this.touched.map((field) => [field, now[field] ?? null]));
	}

	/** What was said about a field: errors come as 'visits.month-3.target.amount'. */
	saidOf(field: string): string[] | undefined {
		const said = Object.entries(this.errors).find(
			([path]) => path === field || path.startsWith(`${field}.`) || path.startsWith(`${field}[`)
		)?.[1];
		return said ? [said] : undefined;
	}
}
