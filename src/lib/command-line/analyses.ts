import { summaryMeasures, type AnalyseTrial, type Question, type SimulationPlan } from '$lib/stats';

/** The analysis that a simulation plan names. */
export function analysisOf(name: SimulationPlan['analysis'], question: Question): AnalyseTrial {
	switch (name) {
		case 'summary-measures':
			return summaryMeasures(question);
	}
}
