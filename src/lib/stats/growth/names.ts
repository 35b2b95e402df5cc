import type { MeanParts, MeanTerm } from '../design/mean-terms.js';

/** `intercept`, `time`, `group[girl]`, `time:group[girl]`, `bmi`, `site[Saltreach]`. */
export function growthName(term: MeanTerm, { groups, covariates }: MeanParts): string {
	switch (term.kind) {
		case 'intercept':
		case 'time':
			return term.kind;
		case 'group':
			return `group[${groups[term.level]}]`;
		case 'time-by-group':
			return `time:group[${groups[term.level]}]`;
		case 'numeric':
			return covariates[term.covariate]!.name;
		case 'category': {
			const { name, levels } = covariates[term.covariate]!;
			return `${name}[${levels[term.level]}]`;
		}
	}
}
