// Group-sequential plans: boundaries, drift and what an observed look says. The first line of each is cold.
import { withModules } from './support/load.mjs';
import { measure } from './support/measure.mjs';

/** @param {number} looks */
const equal = (looks) => Array.from({ length: looks }, (_, k) => (k + 1) / looks);
const common = { sides: 2, alpha: 0.05, power: 0.9, futility: null, observed: null };

await withModules(async (load) => {
	const { monitor, readMonitoringPlan } = await load('src/lib/stats/index.ts');
	/** @param {string} what @param {object} plan */
	const time = async (what, plan) => {
		const work = async () => monitor(readMonitoringPlan({ ...common, ...plan }));
		await measure(`${what}, first time`, 1, work, { first: 0 });
		await measure(what, 50, work);
	};
	await time('5 looks, spending of O’Brien–Fleming type', {
		informationFractions: equal(5),
		efficacy: { kind: 'spending-obrien-fleming' }
	});
	await time('5 looks, Pocock', { informationFractions: equal(5), efficacy: { kind: 'pocock' } });
	await time('5 looks, spending with futility, a look observed', {
		informationFractions: equal(5),
		sides: 1,
		alpha: 0.025,
		efficacy: { kind: 'spending-obrien-fleming' },
		futility: { kind: 'spending-gamma', parameter: -2, beta: 0.1 },
		observed: { look: 3, z: 1.8 }
	});
	await time('20 looks, spending of O’Brien–Fleming type', {
		informationFractions: equal(20),
		efficacy: { kind: 'spending-obrien-fleming' }
	});
});
