import type { Dependence } from '../plan.js';

/** The kinds of dependence that are compared; `+visit` behind one adds effects of visits shared by all. */
export type FamilyKind =
	| 'independent'
	| 'level'
	| 'level+slope'
	| 'serial'
	| 'serial+noise'
	| 'level+serial'
	| 'level+serial+noise';

export interface FamilyMember {
	/** The kind, with `+visit` behind it when visits move everyone. */
	id: string;
	kind: FamilyKind;
	visits: boolean;
	/** What it says of the data, to be set after “with”. */
	words: string;
	/** Kinds that lie within it or on its edge: its likelihood is never below theirs. */
	contains: readonly FamilyKind[];
	dependence: Dependence;
}

interface KindRow {
	words: string;
	subjectEffects: Dependence['subjectEffects'];
	structure: Dependence['errors']['structure'];
	contains: readonly FamilyKind[];
}

const kinds: Record<FamilyKind, KindRow> = {
	independent: {
		words: 'independent errors',
		subjectEffects: 'none',
		structure: 'independent',
		contains: []
	},
	level: {
		words: 'a lasting offset of each subject',
		subjectEffects: 'level',
		structure: 'independent',
		contains: ['independent']
	},
	'level+slope': {
		words: 'a lasting offset and a drift of each subject',
		subjectEffects: 'level-and-slope',
		structure: 'independent',
		contains: ['independent', 'level']
	},
	serial: {
		words: 'errors that fade with time',
		subjectEffects: 'none',
		structure: 'serial',
		contains: ['independent']
	},
	'serial+noise': {
		words: 'errors that fade with time, and noise',
		subjectEffects: 'none',
		structure: 'serial-with-noise',
		// A serial part that never fades, beside noise, is a level.
		contains: ['independent', 'level', 'serial']
	},
	'level+serial': {
		words: 'a lasting offset of each subject and errors that fade with time',
		subjectEffects: 'level',
		structure: 'serial',
		contains: ['independent', 'level', 'serial']
	},
	'level+serial+noise': {
		words: 'a lasting offset of each subject, errors that fade with time, and noise',
		subjectEffects: 'level',
		structure: 'serial-with-noise',
		contains: ['independent', 'level', 'serial', 'serial+noise', 'level+serial']
	}
};

export const withVisits = (kind: FamilyKind, visits: boolean): string =>
	visits ? `${kind}+visit` : kind;

/** One member of the family; serial errors go along time, or along visits when asked. */
export function memberOf(
	kind: FamilyKind,
	visits: boolean,
	along: 'time' | 'visit' = 'time'
): FamilyMember {
	const { words, subjectEffects, structure, contains } = kinds[kind];
	return {
		id: withVisits(kind, visits),
		kind,
		visits,
		words: visits ? `${words}, and visits that move everyone` : words,
		contains,
		dependence: {
			subjectEffects,
			visitEffects: visits,
			errors: { structure, along, varianceBy: 'none' }
		}
	};
}

/** In the order in which they are told: what is simpler first. */
export const familyKinds = Object.keys(kinds) as FamilyKind[];

export const hasLevel = (kind: FamilyKind): boolean => kinds[kind].subjectEffects !== 'none';
export const hasDrift = (kind: FamilyKind): boolean =>
	kinds[kind].subjectEffects === 'level-and-slope';
export const hasFading = (kind: FamilyKind): boolean => kinds[kind].structure !== 'independent';
