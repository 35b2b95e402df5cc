import { memberOf, withVisits, type FamilyKind } from './family.js';
import { threeParts, twoParts } from './plan-evidence.js';
import { RULED_OUT, SELDOM } from './verdict.js';
import type {
	Comparison,
	ComparisonName,
	EvidenceAnswers,
	EvidencePlan,
	EvidenceResult,
	FittedMember
} from './types.js';

const digits = (v: number, places: number) => v.toFixed(places).replace('-', '−');
const count = (n: number) => String(Math.round(n)).replace(/\B(?=(\d{3})+$)/g, ',');

/** p to two significant digits, no finer than the refits tell. */
const probability = ({ p }: Comparison) => (p >= 0.1 ? p.toFixed(2) : p.toPrecision(2));

/** How many of the data sets went as far. */
function howOften(c: Comparison): string {
	const far = Math.round(c.p * (1 + c.refits)) - 1;
	return `${far === 0 ? 'none' : count(far)} of ${count(c.refits)} (p = ${probability(c)}, Monte Carlo error ${c.monteCarloError.toPrecision(1)})`;
}

const often = (c: Comparison) =>
	c.p > SELDOM ? 'often' : c.p > RULED_OUT ? 'seldom' : 'hardly ever';

type Find = (name: ComparisonName) => Comparison | undefined;

/** What the comparison of a lasting offset with fading errors came to. */
function levelAgainstSerial(find: Find): string[] {
	const level = find('serial over level');
	const serial = find('level over serial');
	if (!level || !serial) return [];
	const gain = serial.observed;
	const ahead =
		Math.abs(gain) < 0.005
			? 'The log-likelihoods of a lasting offset and of errors that fade are the same'
			: `The log-likelihood of ${gain > 0 ? 'a lasting offset is' : 'errors that fade is'} higher by ${digits(Math.abs(gain), 2)}`;
	return [
		`${ahead}. Data drawn with errors that fade go at least as far towards a lasting offset ${often(serial)}, in ${howOften(serial)}; data drawn with a lasting offset go at least as far towards errors that fade ${often(level)}, in ${howOften(level)}.`
	];
}

function opening(plan: EvidencePlan, answers: EvidenceAnswers, find: Find): string[] {
	const any = find('any dependence');
	const { verdict, standing } = answers;
	const oneSubject = plan.design.subjects.length === 1;
	if (!any)
		return [
			'Nothing can be said of how the outcomes of one subject hang together: these data carry no model of it.'
		];
	if (oneSubject) {
		const seen =
			any.p <= SELDOM
				? `The errors of this subject hang together from one occasion to the next: independent errors would gain as much by a serial correlation in ${howOften(any)}.`
				: `No serial correlation is shown: independent errors would gain as much by one in ${howOften(any)}.`;
		return [
			seen,
			'One subject, however long it is followed, does not tell a lasting offset from its own mean, so nothing is claimed of lasting offsets.'
		];
	}
	if (verdict === 'none')
		return [
			`No dependence within subjects is seen: independent errors would show as much in ${howOften(any)}, and a lasting offset that holds a tenth of the variance would show as little in only ${howOften(find('weak offset')!)}.`
		];
	if (any.p > SELDOM) {
		const weak = find('weak offset');
		return [
			`These visits are too few to tell whether the outcomes of one subject hang together: independent errors would often show as much, in ${howOften(any)}${weak ? `, and a lasting offset that holds a tenth of the variance would often show as little, in ${howOften(weak)}` : ''}.`
		];
	}
	const both = levelAgainstSerial(find);
	const seen = `The outcomes of one subject hang together: independent errors would show as much in ${howOften(any)}.`;
	if (both.length === 0)
		return [
			seen,
			'Whether this lasts or fades cannot be asked of these data, since only one of the two models can be fitted.'
		];
	const mixed = standing.filter((id) => [...twoParts, threeParts].includes(kindOf(id) as never));
	const grounds = mixed.map((id) => {
		const c = find(`more than ${kindOf(id)}` as ComparisonName)!;
		const words = memberOf(kindOf(id), false).words;
		return `Data drawn with ${words} would leave as much to another model of the family in ${howOften(c)}.`;
	});
	switch (verdict) {
		case 'lasting':
			return answers.fading === 'too-short' || answers.drifting === 'too-short'
				? [
						'Subjects keep a lasting offset, and it is not all: neither an offset alone nor fading errors alone would often produce data like these. What there is besides (a drift of each subject, or errors that fade) these visits do not tell.',
						...both,
						...grounds
					]
				: [
						'Subjects keep a lasting offset: it does not fade over these visits, and nothing in them asks for more.',
						...both
					];
		case 'fading':
			return [
				'The offset fades: what sets a subject apart at one visit is carried on to the next ones and lost with time, and no lasting offset is seen beside it.',
				...both,
				...(standing.includes(withVisits('serial', plan.visitsInAll)) ? [] : grounds)
			];
		case 'lasting-and-fading':
			return [
				'Subjects keep a lasting offset, and beside it errors hang together from one visit to the next and fade: neither alone would often produce data like these.',
				...both,
				...grounds
			];
		case 'drifting':
			return [
				'Subjects keep a lasting offset and drift apart at rates of their own: a lasting offset alone and errors that fade would not often produce data like these.',
				...both,
				...grounds
			];
		case 'outside':
			return [
				'None of these models would often produce data like these; look at the residuals before relying on any of them.',
				...both
			];
		default:
			return standing.length > 1 && grounds.length > 1
				? [
						'The outcomes of one subject hang together in more than one way, and these visits are too few to tell whether a part of it lasts or all of it fades.',
						...both,
						...grounds
					]
				: [
						'These visits are too few to tell a lasting offset from errors that fade with time.',
						seen,
						...both
					];
	}
}

const kindOf = (id: string) => id.replace(/\+visit$/, '') as FamilyKind;

function drift(answers: EvidenceAnswers, find: Find): string[] {
	const c = find('slope beside level');
	// Where no lasting offset stands, a slope beside one is no question.
	if (!c || answers.lastingOffset === 'no') return [];
	const mixture =
		c.mixture?.p == null
			? ''
			: `; the mixture of chi-squared distributions at the edge gives ${c.mixture.p < 1e-4 ? 'p below 0.0001' : `p = ${c.mixture.p.toPrecision(2)}`}`;
	return [
		`A slope of its own for each subject, beside a lasting offset, gains ${digits(c.observed, 2)} in log-likelihood; with a lasting offset alone as much is gained in ${howOften(c)}${mixture}.`
	];
}

function visits(plan: EvidencePlan, answers: EvidenceAnswers, find: Find): string[] {
	const given = [find('visit beside level'), find('visit beside serial')].filter(
		(c) => c !== undefined
	);
	if (given.length === 0) {
		const why = plan.models.find((m) => m.id === 'level+visit' && !m.fitted);
		return why && !why.fitted
			? [`Whether visits move everyone together was not asked. ${why.reason}`]
			: [];
	}
	const numbers = given.map((c) => {
		const model = plan.models.find((m) => m.id === `${c.held}+visit`) as FittedMember;
		const variance = model.estimates.find((e) => e.name === 'visit')?.estimate ?? 0;
		const base = c.held === 'level' ? 'a lasting offset' : 'errors that fade';
		return `Beside ${base}, shared visit effects (standard deviation ${Math.sqrt(variance).toPrecision(3)}) gain ${digits(c.observed, 2)} in log-likelihood; without them as much is gained in ${howOften(c)}.`;
	});
	return [
		answers.together === 'yes'
			? 'All move together at visits: each visit shifts everyone by an amount of its own.'
			: 'No movement of everyone together at visits is shown.',
		...numbers,
		...(plan.visitsInAll
			? ['Because of this, the other comparisons were made with visit effects in every model.']
			: [])
	];
}

const range = ({ lowest, highest }: { lowest: number; highest: number }) => {
	const said = (v: number) => (v >= 100 ? count(v) : v.toPrecision(3).replace(/\.?0+$/, ''));
	return said(lowest) === said(highest)
		? said(lowest)
		: `between ${said(lowest)} and ${said(highest)}`;
};

function sizes(result: Omit<EvidenceResult, 'sentences'>): string[] {
	const { mean, contrast } = result.effectiveSampleSize;
	const rows = `The ${count(result.observations)} rows of ${count(result.subjects)} ${result.subjects === 1 ? 'subject' : 'subjects'}`;
	return [
		`${rows} tell as much about the mean as ${range(mean)} independent rows would${contrast ? `, and as much about “${contrast.name}” as ${range(contrast)}` : ''}${mean.lowest === mean.highest ? '' : ', by the model that is taken'}.`
	];
}

/** The answer in whole sentences: the verdict first, then its grounds, then what was not asked. */
export function sentencesOf(
	plan: EvidencePlan,
	result: Omit<EvidenceResult, 'sentences'>
): string[] {
	const find: Find = (name) => result.comparisons.find((c) => c.name === name);
	const { refits, restarted, failed } = result.refitted;
	const reasons = new Map<string, string[]>();
	for (const m of plan.models)
		if (!m.fitted && !m.id.endsWith('+visit'))
			reasons.set(m.reason, [...(reasons.get(m.reason) ?? []), m.words]);
	const shaky = plan.models.filter((m) => m.fitted && !m.converged);
	return [
		...opening(plan, result.answers, find),
		...drift(result.answers, find),
		...visits(plan, result.answers, find),
		...sizes(result),
		`Each model stands or falls by ${count(result.refits)} data sets drawn under it and refitted (seed ${result.seed}, ${count(refits)} refits): “often” is more than 1 in 20, and a model is ruled out at 1 in 100.${restarted > 0 ? ` ${count(restarted)} refits were begun anew.` : ''}${failed > 0 ? ` ${count(failed)} refits did not converge and count against every claim made here.` : ''}`,
		...[...reasons].map(
			([reason, words]) => `Not fitted: ${words.map((w) => `“${w}”`).join(', ')}. ${reason}`
		),
		...shaky.map(
			(m) => `The fit with ${m.words} did not converge; do not rely on what is said of it.`
		)
	];
}
