/**
 * What the coefficients of the mean are called, in plain words:
 *
 * | name                    | what it is                                                                     |
 * | ----------------------- | ------------------------------------------------------------------------------ |
 * | `intercept`             | mean of the reference group at time 0 (first visit), covariates 0 or reference |
 * | `time`                  | change per unit of time; with knots, before the first of them                  |
 * | `time after 3`          | by how much the change per unit of time is larger from 3 on                     |
 * | `time squared`, `time cubed`, `time to the power 4` | terms of a polynomial                              |
 * | `visit 4`               | mean at visit 4 less mean at the first visit                                   |
 * | `group 1`               | what group 1 adds to the reference group at time 0 (first visit)               |
 * | `time × group 1`, `visit 4 × group 1` | what group 1 adds to that term                                   |
 * | `baseline`              | per unit of the subject's own baseline outcome (its logarithm on a log scale)  |
 * | `bmi`                   | per unit of a numeric covariate                                                |
 * | `site Saltreach`        | what a level of a category adds to its first level                             |
 */
export const interceptName = 'intercept';
export const timeName = 'time';
export const baselineName = 'baseline';

export const knotName = (knot: number) => `time after ${knot}`;

/** `power` from 1. */
export function powerName(power: number): string {
	return ['', timeName, 'time squared', 'time cubed'][power] ?? `time to the power ${power}`;
}

export const visitName = (label: string) => `visit ${label}`;
export const groupName = (level: string) => `group ${level}`;
export const byGroupName = (timeTerm: string, level: string) => `${timeTerm} × ${groupName(level)}`;
export const levelName = (covariate: string, level: string) => `${covariate} ${level}`;
