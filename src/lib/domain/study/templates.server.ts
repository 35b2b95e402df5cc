import { isRandomised, type StudyDefinition } from './definition';
import { readTemplate } from './template';

export interface StudyTemplate {
	key: string;
	definition: StudyDefinition;
	/** What kind of study it makes, for the list to choose from. */
	summary: string;
}

const files = import.meta.glob<string>('../../../../templates/studies/*.json', {
	query: '?raw',
	import: 'default',
	eager: true
});

const several = (count: number, what: string) => `${count} ${what}${count === 1 ? '' : 's'}`;

const summary = (definition: StudyDefinition): string =>
	[
		isRandomised(definition) ? `${definition.arms.length} arms` : 'one arm',
		several(definition.visits.length, 'visit'),
		several(definition.measures.length, 'measure')
	].join(', ');

/** The studies to begin from: one for each file of the templates folder. A file that does not hold is a fault. */
export const studyTemplates: readonly StudyTemplate[] = Object.entries(files)
	.filter(([path]) => !path.endsWith('.schema.json'))
	.map(([path, text]) => {
		const key = path.replace(/^.*\//, '').replace(/\.json$/, '');
		const read = readTemplate(text);
		if (!read.ok)
			throw new Error(`The study template ${key} does not hold: ${JSON.stringify(read.problems)}`);
		return { key, definition: read.definition, summary: summary(read.definition) };
	})
	.sort((a, b) => b.definition.arms.length - a.definition.arms.length);

export const findTemplate = (key: string): StudyTemplate | undefined =>
	studyTemplates.find((template) => template.key === key);

/** The templates as a list to choose from. */
export const templateHeads = studyTemplates.map(({ key, summary, definition: { name } }) => ({
	key,
	name,
	summary
}));
