import { monitor, readMonitoringPlan, type MonitoringResult, type PowerUnder } from '$lib/stats';
import { aligned, figure } from './aligned';
import { answerPlan, type Said } from './plan-file';

/** `heddle boundaries --plan monitor.json [--table]` */
export function boundariesCommand(args: readonly string[]): Promise<Said> {
	return answerPlan('boundaries', args, (plan) => monitor(readMonitoringPlan(plan)), table);
}

function table(result: MonitoringResult): string {
	const futile = result.looks.some((look) => look.futilityZ != null);
	const parts = [
		aligned(
			[
				'look',
				'fraction',
				'efficacy z',
				'one-sided p',
				'alpha spent',
				...(futile ? ['futility z'] : [])
			],
			result.looks.map((look, k) => [
				String(k + 1),
				figure(look.fraction),
				figure(look.efficacyZ),
				figure(look.nominalPOneSided),
				figure(look.cumulativeAlpha),
				...(futile ? [figure(look.futilityZ)] : [])
			])
		),
		aligned(
			['', ''],
			[
				['drift', figure(result.drift)],
				['inflation of information', figure(result.inflationFactor)],
				['expected information under the null', figure(result.underNull.expectedFraction)],
				['expected information under the design', figure(result.underDesign.expectedFraction)]
			]
		).trim()
	];
	if (result.observed) parts.push(lookTable(result));
	return parts.join('\n\n');
}

function lookTable(result: MonitoringResult): string {
	const { look, z, reached } = result.observed!;
	const words = {
		efficacy: 'reached efficacy',
		'efficacy-below': 'reached efficacy on the other side',
		futility: 'reached futility',
		'go-on': 'reached no boundary',
		'not-tested': 'is not tested'
	};
	const power = (label: string, under: PowerUnder | null | undefined) =>
		under ? [[label, ...[under.design, under.trend, under.none].map((p) => figure(p))]] : [];
	const parts = [`Look ${look} with z = ${figure(z)} ${words[reached]}.`];
	if (result.conditionalPower)
		parts.push(
			aligned(
				['conditional power', 'design', 'trend', 'none'],
				[
					...power('any remaining look', result.conditionalPower),
					...power('last look only', result.conditionalPowerFinalOnly)
				]
			),
			`predictive power  ${figure(result.predictivePower)}`
		);
	const [lower, upper] = result.driftInterval!;
	parts.push(
		aligned(
			['as if stopped here', ''],
			[
				['stage-wise p, one-sided', figure(result.stagewiseP)],
				['median-unbiased drift', figure(result.medianUnbiasedDrift)],
				[
					`${figure(result.confidence! * 100)} % interval of the drift`,
					`${figure(lower)} to ${figure(upper)}`
				]
			]
		)
	);
	return parts.join('\n\n');
}
