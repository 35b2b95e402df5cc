import { setTimeout as wait } from 'node:timers/promises';
import type { Visitor } from '../../support/people';
import type { Scene, SceneSubject } from '../../support/visit-scene';

/** A save that the server said it kept. */
export interface Kept {
	id: string;
	version: number;
	/** The column that carries it, and what must stand in it. */
	column: 'entered_value' | 'entered_readings';
	value: number | number[];
}

export interface Tally {
	kept: Kept[];
	/** Requests whose outcome the client never learnt: no answer, or a fault. */
	unanswered: number;
	/** Of those, how many turned out to have been kept. */
	keptUnheard: number;
	/** Answers that have no excuse. */
	wrong: string[];
}

export const emptyTally = (): Tally => ({ kept: [], unanswered: 0, keptUnheard: 0, wrong: [] });

/** The answer's status and body; null when none came, or the server said that it had failed. */
export async function attempt(
	work: () => Promise<Response>
): Promise<{ status: number; body: Record<string, unknown> } | null> {
	try {
		const answer = await work();
		const body = (await answer.json()) as Record<string, unknown>;
		return answer.status >= 500 ? null : { status: answer.status, body };
	} catch {
		return null;
	}
}

/** The same again until there is an answer. */
export async function insist(
	tally: { unanswered: number },
	work: () => Promise<Response>
): Promise<{ answer: { status: number; body: Record<string, unknown> }; tries: number }> {
	for (let tries = 1; tries < 2000; tries++) {
		const answer = await attempt(work);
		if (answer) return { answer, tries };
		tally.unanswered++;
		await wait(50);
	}
	throw new Error('The server never came back');
}

/** Values inside the limits; each differs from the one before it. */
function entryFor(
	key: string,
	round: number
): { entry: unknown; kept: Pick<Kept, 'column' | 'value'> } {
	const single = (value: number) => ({
		entry: { kind: 'value', value: String(value) },
		kept: { column: 'entered_value' as const, value }
	});
	const several = (values: number[]) => ({
		entry: { kind: 'readings', values: values.map(String) },
		kept: { column: 'entered_readings' as const, value: values }
	});
	const step = round % 30;
	switch (key) {
		case 'creatinine':
			return single(60 + step * 4);
		case 'potassium':
			return single(Number((3.5 + (round % 20) / 10).toFixed(1)));
		case 'weight':
			return single(Number((70 + step / 10).toFixed(1)));
		case 'systolic':
			return several([120 + step, 122 + step, 121 + step]);
		default:
			return several([70 + step, 72 + step, 71 + step]);
	}
}

const measured = ['creatinine', 'systolic', 'diastolic', 'weight', 'potassium'];

/** Enters and changes the values of these visits, over and over, until told to stop. */
export async function saveUntil(
	visitor: Visitor,
	scene: Scene,
	subjects: readonly SceneSubject[],
	stopped: () => boolean,
	tally: Tally
): Promise<void> {
	const versions = new Map<string, number>();
	for (let round = 0; !stopped(); round++)
		for (const subject of subjects)
			for (const key of measured) {
				if (stopped()) return;
				const visitId = subject.visits['month-6'] as string;
				const { entry, kept } = entryFor(key, round);
				const at = `${visitId}/${key}`;
				const before = versions.get(at);
				const { answer, tries } = await insist(tally, () =>
					visitor.send(
						'PUT',
						`/api/studies/${scene.studyId}/visits/${visitId}/measurements/${scene.measures[key]}`,
						{ entry, reason: before ? 'Read again from the source.' : '' },
						before ? { 'if-match': `"${before}"` } : {}
					)
				);
				if (answer.status === 200) {
					const { id, version } = answer.body as { id: string; version: number };
					if (version !== (before ?? 0) + 1)
						tally.wrong.push(`${at}: version ${version} after ${before}`);
					tally.kept.push({ id, version, ...kept });
					versions.set(at, version);
				} else if (answer.status === 412 && tries > 1 && before) {
					// The try whose answer was lost had been kept: nobody else changes this value.
					tally.keptUnheard++;
					versions.set(at, before + 1);
				} else tally.wrong.push(`${at}: ${answer.status} ${JSON.stringify(answer.body)}`);
			}
}
