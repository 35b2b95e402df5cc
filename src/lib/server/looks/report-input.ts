import type { LookReportInput } from '$lib/report';
import type { CutFlow } from '$lib/domain/flow/cut-flow';
import type { CutHead } from '$lib/domain/cut/cut.reads.server';
import type { LookResult } from '$lib/domain/look/result';
import manifest from '../../../../package.json';

export interface ReportFacts {
	study: { name: string; code: string; training: boolean };
	cut: CutHead;
	look: { number: number; planned: boolean };
	/** Null where the cut holds no screening log; left out where it is not shown. */
	flow?: CutFlow | null;
	result: LookResult;
	inputHash: string;
	made: { at: Date; by: string };
	released?: { to: string; at: Date };
}

/** Everything a report prints, from what was kept: made again later, it prints the same. */
export function reportInput(facts: ReportFacts): LookReportInput {
	const { study, cut, look, result, made, released } = facts;
	const { words, growth } = result;
	return {
		study,
		kind: words.group?.kind === 'arm' ? 'closed' : 'open',
		cut: {
			id: `cut ${cut.number}`,
			label: cut.label,
			cutOffAt: cut.cutOffAt,
			extractedAt: cut.extractedAt,
			fingerprint: cut.fingerprint,
			subjects: cut.subjects,
			measurements: cut.measurements
		},
		look: { number: look.number, planned: look.planned, question: words.question },
		...(facts.flow === undefined ? {} : { flow: facts.flow }),
		measure: words.measure,
		time: words.time,
		...(words.group ? { group: words.group } : {}),
		covariates: words.covariates,
		result: growth,
		modelWords: words.model,
		provenance: {
			engineVersion: growth.engineVersion,
			appVersion: manifest.version,
			// Fits by likelihood draw nothing at random.
			seed: null,
			softwareVersions: {
				'Node.js': process.versions.node,
				'ml-matrix': manifest.dependencies['ml-matrix'],
				jstat: manifest.dependencies.jstat,
				pdfkit: manifest.dependencies.pdfkit
			},
			inputHash: facts.inputHash,
			madeAt: made.at.toISOString(),
			madeBy: made.by
		},
		...(released ? { released: { to: released.to, at: released.at.toISOString() } } : {})
	};
}
