import words from '../../../templates/report/words.json';

/** The standing words of a report; they live in templates/report, apart from the code that fills them in. */
export { words };

/** `template` with each {slot} filled; a slot without a value is a fault, never printed as a slot. */
export function fill(template: string, values: Readonly<Record<string, string>>): string {
	return template.replace(/\{(\w+)\}/g, (_, slot: string) => {
		const value = values[slot];
		if (value === undefined) throw new Error(`report words: nothing to put into {${slot}}`);
		return value;
	});
}
