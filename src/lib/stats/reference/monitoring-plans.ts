import type { EfficacyRule, MonitoringPlan } from '../monitoring/types.js';
import type { ExpectedDesign } from './load-designs.js';

const kinds: Record<ExpectedDesign['type_code'], EfficacyRule['kind']> = {
	P: 'pocock',
	OF: 'obrien-fleming',
	WT: 'wang-tsiatis',
	asOF: 'spending-obrien-fleming',
	asP: 'spending-pocock',
	asKD: 'spending-power',
	asHSD: 'spending-gamma'
};

/** For tests only: a reference design in our own words. */
export function planOf(design: ExpectedDesign): MonitoringPlan {
	const { beta, futility } = design;
	return {
		informationFractions: design.information_fractions,
		sides: design.sided,
		alpha: design.alpha,
		power: 1 - beta,
		efficacy: {
			kind: kinds[design.type_code],
			parameter: design.spending_parameter ?? design.wang_tsiatis_delta
		},
		futility: !futility
			? null
			: futility.rule === 'bsOF'
				? { kind: 'spending-obrien-fleming', beta }
				: { kind: 'fixed', z: futility.futility_z, beta }
	};
}
