import type { Things } from './crowd';

/** As much of JSON Schema as our OpenAPI document uses. */
export interface Schema {
	$ref?: string;
	type?: string | string[];
	format?: string;
	pattern?: string;
	enum?: unknown[];
	const?: unknown;
	anyOf?: Schema[];
	oneOf?: Schema[];
	allOf?: Schema[];
	properties?: Record<string, Schema>;
	required?: string[];
	additionalProperties?: boolean | Schema;
	items?: Schema;
	minItems?: number;
	maxItems?: number;
	minLength?: number;
	maxLength?: number;
	minimum?: number;
	maximum?: number;
	exclusiveMinimum?: number;
	exclusiveMaximum?: number;
	default?: unknown;
}

export interface Parameter {
	name: string;
	in: 'path' | 'query' | 'header';
	required?: boolean;
	schema: Schema;
}

export interface Operation {
	/** 'POST /api/studies/{study}/screenings' */
	name: string;
	method: string;
	path: string;
	parameters: Parameter[];
	body: Schema | null;
	needsVersion: boolean;
}

interface Document {
	paths: Record<
		string,
		Record<
			string,
			{
				parameters?: Parameter[];
				requestBody?: { content: { 'application/json': { schema: Schema } } };
			}
		>
	>;
	components?: { schemas?: Record<string, Schema> };
}

export class OpenApi {
	constructor(private readonly document: Document) {}

	get operations(): Operation[] {
		return Object.entries(this.document.paths).flatMap(([path, methods]) =>
			Object.entries(methods).map(([method, operation]) => {
				const parameters = operation.parameters ?? [];
				return {
					name: `${method.toUpperCase()} ${path}`,
					method: method.toUpperCase(),
					path,
					parameters,
					body: operation.requestBody?.content['application/json'].schema ?? null,
					needsVersion: parameters.some((p) => p.in === 'header' && p.name === 'If-Match')
				};
			})
		);
	}

	resolve(schema: Schema): Schema {
		const name = schema.$ref?.split('/').pop();
		return name ? this.resolve(this.document.components?.schemas?.[name] ?? {}) : schema;
	}

	/** Every way in which the schema may be met: its branches, references followed. */
	branches(schema: Schema): Schema[] {
		const own = this.resolve(schema);
		const many = own.anyOf ?? own.oneOf;
		return many ? many.flatMap((each) => this.branches(each)) : [own];
	}

	/** Something that meets the schema as far as the schema tells; `name` chooses ids that are there. */
	sample(schema: Schema, name: string, things: Things): unknown {
		const own = this.branches(schema).find((s) => s.type !== 'null') ?? {};
		if (own.const !== undefined) return own.const;
		if (own.enum) return own.enum[0];
		const type = Array.isArray(own.type) ? own.type.find((t) => t !== 'null') : own.type;
		switch (type) {
			case 'object':
				return Object.fromEntries(
					Object.entries(own.properties ?? {})
						.filter(([key]) => own.required?.includes(key))
						.map(([key, inner]) => [key, this.sample(inner, key, things)])
				);
			case 'array':
				return Array.from({ length: own.minItems ?? 0 }, () =>
					this.sample(own.items ?? {}, name, things)
				);
			case 'integer':
			case 'number':
				return Math.max(1, own.minimum ?? 1);
			case 'boolean':
				return true;
			default:
				return this.text(own, name, things);
		}
	}

	private text(schema: Schema, name: string, things: Things): string {
		if (schema.format === 'uuid')
			return things[name.replace(/Id$/, '').replace(/s$/, '')] ?? (things.site as string);
		if (schema.format === 'date' || /(On|Date|From)$/.test(name)) return '2026-06-09';
		if (schema.format === 'date-time' || /At$/.test(name)) return '2026-06-09T09:00:00Z';
		return 'x'.repeat(Math.max(3, schema.minLength ?? 0));
	}

	/** Whether the schema lets the value pass; told only for what it says plainly, and yes where it does not. */
	accepts(schema: Schema, value: unknown): boolean {
		return this.branches(schema).some((own) => this.acceptsOne(own, value));
	}

	private acceptsOne(own: Schema, value: unknown): boolean {
		if (own.const !== undefined) return own.const === value;
		if (own.enum) return own.enum.includes(value as never);
		const types = own.type === undefined ? [] : Array.isArray(own.type) ? own.type : [own.type];
		const is = value === null ? 'null' : Array.isArray(value) ? 'array' : (typeof value as string);
		const fits =
			types.length === 0 ||
			types.includes(is) ||
			(is === 'number' && types.includes('integer') && Number.isInteger(value));
		if (!fits) return false;
		if (typeof value === 'string') {
			if (own.minLength !== undefined && value.length < own.minLength) return false;
			if (own.maxLength !== undefined && value.length > own.maxLength) return false;
			if (own.pattern !== undefined && !new RegExp(own.pattern, 'u').test(value)) return false;
			if (own.format === 'uuid' && !/^[0-9a-f-]{36}$/.test(value)) return false;
		}
		if (typeof value === 'number') {
			if (own.minimum !== undefined && value < own.minimum) return false;
			if (own.maximum !== undefined && value > own.maximum) return false;
			if (own.exclusiveMinimum !== undefined && value <= own.exclusiveMinimum) return false;
			if (own.exclusiveMaximum !== undefined && value >= own.exclusiveMaximum) return false;
		}
		if (Array.isArray(value)) {
			if (own.minItems !== undefined && value.length < own.minItems) return false;
			if (own.maxItems !== undefined && value.length > own.maxItems) return false;
			return value.every((each) => this.accepts(own.items ?? {}, each));
		}
		if (value && typeof value === 'object' && own.properties)
			return (own.required ?? []).every((key) => key in value);
		return true;
	}

	/** Paths to every property, through objects and the first item of arrays. */
	fields(
		schema: Schema,
		prefix: (string | number)[] = []
	): { path: (string | number)[]; schema: Schema }[] {
		if (prefix.length > 4) return [];
		return this.branches(schema).flatMap((own) => {
			const inner = Object.entries(own.properties ?? {}).flatMap(([key, property]) => [
				{ path: [...prefix, key], schema: property },
				...this.fields(property, [...prefix, key])
			]);
			return own.items ? [...inner, ...this.fields(own.items, [...prefix, 0])] : inner;
		});
	}
}

/** A copy of `body` with `value` at the path; objects and arrays on the way are made. */
export function withValue(body: unknown, path: (string | number)[], value: unknown): unknown {
	const [head, ...rest] = path;
	if (head === undefined) return value;
	if (typeof head === 'number') {
		const list = Array.isArray(body) ? [...body] : [];
		list[head] = withValue(list[head], rest, value);
		return list;
	}
	const object = body && typeof body === 'object' && !Array.isArray(body) ? { ...body } : {};
	return { ...object, [head]: withValue((object as Record<string, unknown>)[head], rest, value) };
}
