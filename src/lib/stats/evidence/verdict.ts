import { hasDrift, hasFading, hasLevel, memberOf, withVisits, type FamilyKind } from './family.js';
import { threeParts, twoParts } from './plan-evidence.js';
import type {
	Answer,
	Comparison,
	ComparisonName,
	EvidenceAnswers,
	EvidencePlan,
	Verdict
} from './types.js';

/** Data that a model would produce in this share of data sets or less come up seldom: common practice, 1 in 20. */
export const SELDOM = 0.05;
/**
 * At this share or less a model is ruled out: 1 in 100. A choice: stricter than `SELDOM`, so that the right kind is not
 * thrown out in 1 of 20 data sets that could tell very well.
 */
export const RULED_OUT = 0.01;

type OnePart = 'level' | 'serial';
type ManyPart = (typeof twoParts)[number] | typeof threeParts;

const answerOf = (standing: readonly FamilyKind[], has: (kind: FamilyKind) => boolean): Answer =>
	standing.length === 0
		? 'not-asked'
		: standing.every(has)
			? 'yes'
			: standing.some(has)
				? 'too-short'
				: 'no';

/** Which of the one-part models stand, given p-values by name; null when neither does. */
function standingOfOnePart(p: (name: ComparisonName) => number | null): OnePart[] | null {
	const others: Record<OnePart, number | null> = {
		level: p('serial over level'),
		serial: p('level over serial')
	};
	const more: Record<OnePart, number | null> = {
		level: p('more than level'),
		serial: p('more than serial')
	};
	const tenable = (['level', 'serial'] as const).filter(
		(kind) => (others[kind] ?? 1) > RULED_OUT && (more[kind] ?? 1) > RULED_OUT
	);
	if (tenable.length === 0) return null;
	const often = tenable.filter((kind) => others[kind]! > SELDOM);
	return often.length === 0 ? [...tenable] : often;
}

/** Models of two parts that would often produce data like these; failing that, those not ruled out; then that of three. */
function standingOfManyParts(p: (name: ComparisonName) => number | null): ManyPart[] {
	const above = (kind: ManyPart, share: number) => (p(`more than ${kind}`) ?? 0) > share;
	const often = twoParts.filter((kind) => above(kind, SELDOM));
	if (often.length > 0) return often;
	const left = twoParts.filter((kind) => above(kind, RULED_OUT));
	return left.length === 0 && above(threeParts, RULED_OUT) ? [threeParts] : left;
}

function verdictOf(standing: readonly FamilyKind[]): Verdict {
	if (standing.length === 0) return 'outside';
	const offset = answerOf(standing, hasLevel);
	if (offset === 'too-short') return 'too-short';
	if (offset === 'no') return standing.every(hasFading) ? 'fading' : 'none';
	if (standing.every((kind) => hasLevel(kind) && hasFading(kind))) return 'lasting-and-fading';
	return standing.every(hasDrift) ? 'drifting' : 'lasting';
}

/** Whether visits move everyone, under the models that stand. */
function togetherOf(
	p: (name: ComparisonName) => number | null,
	standing: readonly FamilyKind[]
): Answer {
	const level = p('visit beside level');
	const serial = p('visit beside serial');
	const asked = [
		...(standing.every((kind) => hasFading(kind) && !hasLevel(kind)) && standing.length > 0
			? []
			: [level]),
		...(standing.every((kind) => !hasFading(kind)) && standing.length > 0 ? [] : [serial])
	].filter((v) => v !== null);
	const ps = asked.length > 0 ? asked : [level, serial].filter((v) => v !== null);
	if (ps.length === 0) return 'not-asked';
	return ps.every((v) => v <= SELDOM) ? 'yes' : 'no';
}

/**
 * The verdict, from where the gains fall among the refits and from nothing else.
 *
 * 1. Is there any dependence? When independent errors would often (p above 1 in 20) gain as much: `none` if a lasting offset
 * holding a tenth of the variance would gain as little in at most 1 in 20 data sets, else `too-short`.
 * 2. A lasting offset against errors that fade. Each is ruled out at 1 in 100, by the other or by models of two parts. Of
 * those left, one stands that would often (above 1 in 20) leave the other so far behind when the other would not; both, when
 * both would (or neither): `too-short`.
 * 3. Both ruled out: models of two parts, each against the best of the others under itself. Those that would often lose by as
 * much stand; failing any, those not ruled out; failing these, the model of three parts unless it is ruled out; else `outside`.
 * Without a lasting offset in the family (one subject) the data never speak for one.
 */
export function answersOf(plan: EvidencePlan, comparisons: readonly Comparison[]): EvidenceAnswers {
	const p = (name: ComparisonName) => comparisons.find((c) => c.name === name)?.p ?? null;
	const fitted = (kind: FamilyKind) =>
		plan.models.some((m) => m.fitted && m.id === withVisits(kind, plan.visitsInAll));
	const finish = (standing: readonly FamilyKind[], special: Partial<EvidenceAnswers> = {}) => ({
		verdict: verdictOf(standing),
		standing: standing.map((kind) => memberOf(kind, plan.visitsInAll).id),
		lastingOffset: answerOf(standing, hasLevel),
		fading: answerOf(standing, hasFading),
		drifting: fitted('level+slope') ? answerOf(standing, hasDrift) : ('not-asked' as const),
		together: togetherOf(p, standing),
		...special
	});
	const any = p('any dependence');
	if (any === null)
		return finish(['independent'], {
			verdict: 'too-short',
			lastingOffset: 'not-asked',
			fading: 'not-asked'
		});
	const possible = (['level', 'serial'] as const).filter(fitted);
	if (any > SELDOM) {
		const weak = p('weak offset');
		return weak !== null && weak <= SELDOM
			? finish(['independent'])
			: finish(['independent', ...possible], {
					verdict: 'too-short',
					lastingOffset: 'too-short',
					fading: 'too-short',
					drifting: fitted('level+slope') ? 'too-short' : 'not-asked'
				});
	}
	if (!fitted('level'))
		return finish(possible, { verdict: 'too-short', lastingOffset: 'too-short' });
	if (!fitted('serial'))
		return finish(possible, {
			verdict: 'too-short',
			lastingOffset: 'too-short',
			fading: 'not-asked'
		});
	const one = standingOfOnePart(p);
	if (one && one.length > 1 && fitted('level+slope')) return finish(one, { drifting: 'too-short' });
	return finish(one ?? standingOfManyParts(p));
}
