import {
	planStudy,
	readDesignPlan,
	simulatedStudy,
	summariseReplicates,
	type DesignResult,
	type SimulationSummary
} from '$lib/stats';
import { aligned, figure } from './aligned';
import { answerPlan, type Said } from './plan-file';
import { simulateInThreads } from './simulate-in-threads';

/** `heddle design --plan design.json [--table]` */
export function designCommand(args: readonly string[]): Promise<Said> {
	return answerPlan('design', args, answer, table);
}

type Answer = DesignResult & {
	simulation: {
		analysis: string;
		seed: number;
		underDesign: SimulationSummary;
		underNull: SimulationSummary;
	} | null;
};

async function answer(written: unknown): Promise<Answer> {
	const plan = readDesignPlan(written);
	const result = planStudy(plan);
	if (!plan.simulation) return { ...result, simulation: null };
	const study = simulatedStudy(plan, result);
	const under = async (truth: number) =>
		summariseReplicates(study, await simulateInThreads(study, truth, plan.simulation!));
	return {
		...result,
		simulation: {
			analysis: plan.simulation.analysis,
			seed: plan.simulation.seed,
			underDesign: await under(plan.test.difference),
			underNull: await under(0)
		}
	};
}

function table(result: Answer): string {
	const { arm0, arm1, total } = result.subjects;
	const parts = [
		aligned(
			['', 'arm 0', 'arm 1', 'total'],
			[
				['subjects', String(arm0), String(arm1), String(total)],
				[
					'before rounding up',
					figure(result.unrounded.arm0),
					figure(result.unrounded.arm1),
					figure(result.unrounded.total)
				]
			]
		),
		[
			`power ${figure(result.power)}`,
			`variance of the difference ${figure(result.variance)}`,
			`inflation for looks ${figure(result.inflationFactor)}`
		].join('\n')
	];
	if (result.looks)
		parts.push(
			aligned(
				['look', 'fraction', 'efficacy z', 'alpha spent', 'futility z'],
				result.looks.map((look, k) => [
					String(k + 1),
					figure(look.fraction),
					figure(look.efficacyZ),
					figure(look.cumulativeAlpha),
					figure(look.futilityZ)
				])
			)
		);
	if (result.simulation) {
		const { underDesign, underNull } = result.simulation;
		const row = (
			label: string,
			pick: (s: SimulationSummary) => { estimate: number; error: number }
		) => [
			label,
			...[underDesign, underNull].map(
				(s) => `${figure(pick(s).estimate, 4)} ± ${figure(pick(s).error, 2)}`
			)
		];
		parts.push(
			aligned(
				[
					`simulated, ${underDesign.replicates} trials (± Monte Carlo error)`,
					'difference',
					'no difference'
				],
				[
					row('crossed in the planned direction', (s) => s.above),
					row('crossed on either side', (s) => s.eitherSide),
					row('bias', (s) => s.bias),
					row('coverage', (s) => s.coverage),
					row('share of subjects at stopping', (s) => s.expectedFraction)
				]
			)
		);
	}
	return parts.join('\n\n');
}
