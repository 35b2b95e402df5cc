import type { Design } from '../design/design.js';
import type { ResidualPoint, SubjectEffect, Trajectory } from '../types.js';

/** Each subject's outcomes in the order of time, with the subject's own fitted values; outcome unit. */
export function trajectories(
	design: Design,
	residuals: readonly ResidualPoint[],
	effects: readonly SubjectEffect[] | null
): Trajectory[] {
	const all = design.subjects.map((label, subject): Trajectory => ({
		subject,
		label,
		group: design.groups[design.subjectGroup[subject]!] ?? null,
		points: [],
		effect: effects?.[subject] ?? null
	}));
	residuals.forEach(({ subject, time, fitted }, i) =>
		all[subject]!.points.push({ time, outcome: design.y[i]!, fitted })
	);
	for (const one of all) one.points.sort((a, b) => a.time - b.time);
	return all;
}
