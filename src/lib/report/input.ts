import type { CutFlow } from '$lib/domain/flow/cut-flow';
import type { GrowthResult } from '$lib/stats/types';

export interface LookReportInput {
	study: { name: string; code: string; training?: boolean };
	/** Open: pooled only. Closed: by arm, in letters. */
	kind: 'open' | 'closed';
	cut: {
		id: string;
		label: string;
		/** ISO 8601 instants. */
		cutOffAt: string;
		extractedAt: string;
		/** SHA-256 of the cut's canonical content, 64 hexadecimal digits. */
		fingerprint: string;
		subjects: number;
		measurements: number;
	};
	look: { number: number; planned: boolean; question: string };
	/** At the cut-off: everybody together, or by coded arm. Null says that the cut does not hold it. */
	flow?: CutFlow | null;
	measure: { name: string; unit: string; derived?: boolean };
	/** `unit` as beside a number ("years"), `one` as after "per" ("year"); `name` is what the time is ("age"). */
	time: { name: string; unit: string; one: string };
	/**
	 * What the groups of the result are. Arms appear by letter alone: `letters` gives each level of
	 * the result its letter, and may be left out when the levels are letters already.
	 */
	group?:
		| { kind: 'arm'; letters?: Readonly<Record<string, string>> }
		| { kind: 'characteristic'; label: string };
	covariates?: Readonly<Record<string, { label: string; unit?: string }>>;
	result: GrowthResult;
	/** The model as a sentence, as the person who chose it read it. */
	modelWords: string;
	estimand?: string;
	sensitivity?: string;
	provenance: {
		engineVersion: string;
		appVersion: string;
		/** Null says that nothing was drawn at random; leaving it out is a fault. */
		seed: number | string | null;
		softwareVersions: Readonly<Record<string, string>>;
		inputHash: string;
		/** ISO 8601 instant. */
		madeAt: string;
		madeBy: string;
	};
	released?: { to: string; at: string };
}

/** A report that may not be made; `missing` and the like are faults of the caller, not of a person. */
export class ReportFault extends Error {
	constructor(
		readonly code:
			| 'PROVENANCE_MISSING'
			| 'FINGERPRINT_MALFORMED'
			| 'ENGINE_MISMATCH'
			| 'ARMS_IN_OPEN_REPORT'
			| 'ARM_WITHOUT_LETTER'
			| 'ARM_NAME_SHOWN'
			| 'GROUP_UNEXPLAINED',
		message: string
	) {
		super(message);
		this.name = 'ReportFault';
	}
}

const blank = (value: unknown): boolean =>
	value === undefined || value === null || (typeof value === 'string' && value.trim() === '');

/** Throws unless everything a reader needs to make the numbers again is there. */
export function checkInput(input: LookReportInput): void {
	const { cut, provenance, result } = input;
	const needed: [string, unknown][] = [
		['cut.id', cut?.id],
		['cut.label', cut?.label],
		['cut.cutOffAt', cut?.cutOffAt],
		['cut.extractedAt', cut?.extractedAt],
		['modelWords', input.modelWords],
		['provenance.engineVersion', provenance?.engineVersion],
		['provenance.appVersion', provenance?.appVersion],
		['provenance.inputHash', provenance?.inputHash],
		['provenance.madeAt', provenance?.madeAt],
		['provenance.madeBy', provenance?.madeBy],
		// Null is an answer here, silence is not.
		['provenance.seed', provenance?.seed === null ? 'none' : provenance?.seed]
	];
	const versions = Object.entries(provenance?.softwareVersions ?? {});
	if (versions.length === 0) needed.push(['provenance.softwareVersions', undefined]);
	for (const [name, version] of versions) {
		needed.push([`provenance.softwareVersions.${name}`, version]);
	}
	const missing = needed.filter(([, value]) => blank(value)).map(([name]) => name);
	if (missing.length > 0) {
		throw new ReportFault(
			'PROVENANCE_MISSING',
			`a report cannot be made without ${missing.join(', ')}`
		);
	}
	if (!/^[0-9a-f]{64}$/.test(cut.fingerprint)) {
		throw new ReportFault('FINGERPRINT_MALFORMED', 'the fingerprint is not 64 hexadecimal digits');
	}
	if (provenance.engineVersion !== result.engineVersion) {
		throw new ReportFault(
			'ENGINE_MISMATCH',
			`the result was made by engine ${result.engineVersion}, not ${provenance.engineVersion}`
		);
	}
	const flowByArm = input.flow?.flow.columns.some((column) => column.arm !== null) ?? false;
	if ((input.group?.kind === 'arm' || flowByArm) && input.kind === 'open') {
		throw new ReportFault(
			'ARMS_IN_OPEN_REPORT',
			'an open report is pooled; it may not compare arms'
		);
	}
	if (!input.group && result.model.groupLevels.length > 0) {
		throw new ReportFault('GROUP_UNEXPLAINED', 'the result has groups; say what they are');
	}
}
