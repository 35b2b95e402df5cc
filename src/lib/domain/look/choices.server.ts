import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { isUnit } from '../../units/units';
import { openTo, studyDefinition } from '../study/definition';
import type { CutContent } from '../cut/content';
import type { LookTimeUnit } from './look.input';

type Known = Pick<CutContent, 'measures' | 'characteristics' | 'timeUnit' | 'anchor'>;

/** What the slots of a look's sentence may hold in this study. */
export interface LookChoices {
	definition: Known;
	randomised: boolean;
	/** The first is offered first. */
	timeUnits: LookTimeUnit[];
	primaryMeasure: string;
}

/** From the newest published protocol version; a study without one has nothing to look at. */
export async function lookChoices(reader: Reader, studyId: string): Promise<LookChoices> {
	const newest = await reader
		.selectFrom('protocol_version')
		.select('definition')
		.where('study_id', '=', studyId)
		.where('status', '=', 'published')
		.orderBy('number', 'desc')
		.executeTakeFirst();
	if (!newest) throw new Refusal('NOT_PUBLISHED');
	const found = studyDefinition.parse(newest.definition);
	const given = await reader
		.selectFrom('visit')
		.select('id')
		.where('study_id', '=', studyId)
		.where('study_time', 'is not', null)
		.limit(1)
		.executeTakeFirst();
	const dated = [
		found.timeUnit,
		...(['day', 'week', 'month', 'year'] as const).filter((unit) => unit !== found.timeUnit)
	];
	const hidden = openTo(found);
	const measures = found.measures
		.filter(({ key }) => !hidden.has(key))
		.filter(({ kind }) => kind === 'number' || kind === 'repeated' || kind === 'derived')
		.map((measure) => ({
			key: measure.key,
			name: measure.name,
			kind: measure.kind,
			unit: 'unit' in measure && isUnit(measure.unit) ? measure.unit : null,
			decimals: 'decimals' in measure ? measure.decimals : 0
		}));
	return {
		definition: {
			measures,
			characteristics: found.characteristics.filter(({ kind }) => kind !== 'birth-date'),
			timeUnit: found.timeUnit,
			anchor: found.arms.length >= 2 ? 'randomisation' : 'enrolment'
		},
		randomised: found.arms.length >= 2,
		timeUnits: given ? ['as given', ...dated] : dated,
		primaryMeasure: found.primaryMeasure
	};
}

/** Null while the study has no published protocol version. */
export const findLookChoices = (actor: Actor, studyId: string): Promise<LookChoices | null> =>
	read(actor, 'look.read', { studyId }, async (reader) => {
		try {
			return await lookChoices(reader, studyId);
		} catch (thrown) {
			if (thrown instanceof Refusal && thrown.code === 'NOT_PUBLISHED') return null;
			throw thrown;
		}
	});
