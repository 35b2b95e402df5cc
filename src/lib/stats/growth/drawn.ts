import type { BuiltDesign } from '../design/build-model-design.js';
import type { FittedRows } from '../prediction/conditional-fit.js';
import type { GroupSummary, ResidualPoint, SubjectEffect, Trajectory } from '../types.js';

/** Position of the subject of each row of the design. */
export function subjectOfRows({ design }: BuiltDesign): Int32Array {
	const subject = new Int32Array(design.n);
	for (let s = 0; s < design.subjects.length; s++)
		subject.fill(s, design.subjectStart[s], design.subjectStart[s + 1]);
	return subject;
}

/** Rows of the design in the order they were handed in. */
const asHandedIn = ({ design }: BuiltDesign) =>
	Array.from({ length: design.n }, (_, i) => i).sort((a, b) => design.rowOf[a]! - design.rowOf[b]!);

/** Fitted values and residuals of each used row, in the order handed in. */
export function residualPoints(built: BuiltDesign, rows: FittedRows): ResidualPoint[] {
	const subject = subjectOfRows(built);
	return asHandedIn(built).map((i) => ({
		subject: subject[i]!,
		time: built.design.time[i]!,
		fitted: rows.fitted[i]!,
		marginalFitted: rows.marginalFitted[i]!,
		conditional: rows.conditional[i]!,
		marginal: rows.marginal[i]!
	}));
}

/** Each subject's outcomes in the order of time, with the subject's own fitted values. */
export function trajectories({ design }: BuiltDesign, rows: FittedRows): Trajectory[] {
	return design.subjects.map((label, subject) => {
		const level = rows.effects?.[subject]!.level ?? null;
		const effect: SubjectEffect | null = level && {
			offset: level.estimate,
			conditionalStandardError: level.conditionalSe,
			predictionStandardError: level.predictionSe
		};
		const from = design.subjectStart[subject]!;
		const points = Array.from({ length: design.subjectStart[subject + 1]! - from }, (_, k) => ({
			time: design.time[from + k]!,
			outcome: design.y[from + k]!,
			fitted: rows.fitted[from + k]!
		}));
		return {
			subject,
			label,
			group: design.groups[design.subjectGroup[subject]!] ?? null,
			points,
			effect
		};
	});
}

export function groupSummaries({ design }: BuiltDesign): GroupSummary[] {
	const summaries = design.groups.map((name) => ({ name, subjects: 0, observations: 0 }));
	if (summaries.length === 0) return summaries;
	design.subjects.forEach((_, s) => {
		const summary = summaries[design.subjectGroup[s]!]!;
		summary.subjects++;
		summary.observations += design.subjectStart[s + 1]! - design.subjectStart[s]!;
	});
	return summaries;
}
