import type { GrowthResult } from '$lib/stats/types';
import type { LookWords } from './words';

/** What a finished look keeps: the numbers, the words they go with, and what could not be used. */
export interface LookResult {
	growth: GrowthResult;
	words: LookWords;
	leftOut: string[];
}

/** Why a by-arm look has no result, kept where only its reader sees it. */
export interface LookRefused {
	refused: string;
}

export const isRefused = (held: LookResult | LookRefused): held is LookRefused => 'refused' in held;
