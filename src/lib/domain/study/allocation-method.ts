import { isRandomised, type StudyDefinition } from './definition';

/** Whether arms are allocated by minimisation rather than from a list of permuted blocks. */
export const minimises = (definition: StudyDefinition): boolean =>
	isRandomised(definition) && definition.allocation?.method === 'minimisation';
