import { sql } from 'kysely';
import { recordMeasurement } from '$lib/domain/measurement/measurement.commands.server';
import { formulas } from '$lib/domain/measurement/formulas';
import { sign } from '$lib/domain/signature/signature.commands.server';
import { findWaiting } from '$lib/domain/signature/signature.reads.server';
import { recordExit } from '$lib/domain/subject/exit.commands.server';
import {
	addScreening,
	answerEligibility,
	closeScreening
} from '$lib/domain/subject/screening.commands.server';
import { recordConsent } from '$lib/domain/consent/consent.commands.server';
import { enrolSubject, randomiseSubject } from '$lib/domain/subject/subject.commands.server';
import { bookVisit, moveAppointment } from '$lib/domain/visit/booking.commands.server';
import { declareMissed, logContact } from '$lib/domain/visit/chase.commands.server';
import { finishVisit, startVisit } from '$lib/domain/visit/conduct.commands.server';
import { endSession, startSession } from '$lib/server/auth/session';
import type { Actor } from '$lib/server/actor';
import { systemActor } from '$lib/server/actor';
import { readOwn } from '$lib/server/change';
import type { Database } from '$lib/server/db/db';
import { addDays, ageInYears, daysBetween, plainDateOf, type PlainDate } from '$lib/time/dates';
import { instantFromLocal } from '$lib/time/zones';
import {
	aldermereFailures,
	aldermereSites,
	tellingMeasure,
	trueEgfr,
	type StorySubject,
	type StoryVisit
} from './aldermere';
import { Places, workingDay } from './calendar';
import { at, besideOthers, demoPassword } from './stage.server';

export interface SiteCast {
	id: string;
	coordinator: Actor;
	investigator: Actor;
	pharmacist: Actor;
	/** Nurse and room go together. */
	pairs: { roomId: string; nurse: Actor }[];
}

export interface Cast {
	studyId: string;
	consentVersionId: string;
	criteria: { key: string; kind: 'inclusion' | 'exclusion' }[];
	sites: SiteCast[];
	/** For one question: which arm the subject is in, so that its measurements can follow. */
	unmasked: Database;
}

interface PlannedRow {
	id: string;
	key: string;
	version: number;
	earliest: PlainDate;
	target: PlainDate;
	latest: PlainDate;
	minutes: number;
	measures: { id: string; key: string }[];
}

interface Act {
	when: Date;
	run: () => Promise<void>;
}

/** Acts by site and day; an act may add later ones. Within a day the sites act side by side, as sites do. */
class Diary {
	private readonly days = new Map<string, Act[]>();
	constructor(
		private readonly now: Date,
		private readonly sites: number
	) {}

	add(site: number, when: Date, run: () => Promise<void>): void {
		// What has not come yet is left to whoever tries the demo.
		if (when >= this.now) return;
		const key = `${site}|${when.toISOString().slice(0, 10)}`;
		const acts = this.days.get(key);
		if (acts) acts.push({ when, run });
		else this.days.set(key, [{ when, run }]);
	}

	async play(from: PlainDate, to: PlainDate, each: (share: number) => void): Promise<void> {
		const whole = daysBetween(from, to) + 1;
		for (let day = from, n = 0; day <= to; day = addDays(day, 1), n++) {
			await Promise.all(
				Array.from({ length: this.sites }, (_, site) => besideOthers(() => this.playDay(site, day)))
			);
			each((n + 1) / whole);
		}
	}

	private async playDay(site: number, day: PlainDate): Promise<void> {
		const acts = this.days.get(`${site}|${day}`) ?? [];
		while (acts.length > 0) {
			acts.sort((a, b) => a.when.getTime() - b.when.getTime());
			const act = acts.shift() as Act;
			at(act.when);
			await act.run();
		}
	}
}

const minutesLater = (instant: Date, minutes: number) =>
	new Date(instant.getTime() + minutes * 60_000);

/** The creatinine (µmol/L) at which the published formula gives this filtration rate; it falls as creatinine rises. */
function creatinineFor(egfr: number, age: number, sex: string): number {
	let low = 0.2;
	let high = 20;
	for (let i = 0; i < 60; i++) {
		const middle = (low + high) / 2;
		const found = formulas['egfr-ckd-epi-2021'].compute({ creatinine: middle, age, sex });
		if (found > egfr) low = middle;
		else high = middle;
	}
	return Math.round(low * 88.4);
}

export class Trial {
	private readonly diary: Diary;
	private readonly places = new Places(2);

	constructor(
		private readonly cast: Cast,
		private readonly now: Date,
		private readonly today: PlainDate
	) {
		this.diary = new Diary(now, cast.sites.length);
	}

	private site = (number: number) => this.cast.sites[number] as SiteCast;
	private zone = (number: number) => aldermereSites[number]?.zone ?? 'UTC';
	private local = (site: number, day: PlainDate, time: string) =>
		instantFromLocal(day, time, this.zone(site));

	async play(people: StorySubject[], each: (share: number) => void): Promise<void> {
		people.forEach((subject, number) => {
			const hour = 8 + (number % 4);
			const time = `${String(hour).padStart(2, '0')}:${number % 2 ? '10' : '40'}`;
			const arrives = this.local(subject.site, subject.enrolsOn, time);
			this.diary.add(subject.site, arrives, () => this.enrol(subject, arrives));
		});
		for (const failure of aldermereFailures(this.today))
			this.diary.add(failure.site, this.local(failure.site, failure.on, '15:20'), () =>
				this.turnAway(failure.site, failure.on, failure.reason)
			);
		// Somebody is always in screening.
		for (const [site, cast] of this.cast.sites.entries()) {
			const day = workingDay(addDays(this.today, -2 - site), (each) => each < this.today);
			if (!day) continue;
			this.diary.add(site, this.local(site, day, '14:10'), async () => {
				await addScreening(cast.coordinator, this.cast.studyId, {
					siteId: cast.id,
					screenedOn: day
				});
				await this.answered(cast, day);
			});
			this.diary.add(site, this.local(site, day, '15:40'), () => this.signWaiting(cast));
			// One more waits for the investigator.
			this.diary.add(site, this.local(site, day, '16:20'), () => this.answered(cast, day));
		}
		const first = people[0]?.enrolsOn ?? this.today;
		await this.diary.play(addDays(first, -2), addDays(this.today, 1), each);
	}

	/** Somebody in screening whose checklist is complete. */
	private async answered(cast: SiteCast, day: PlainDate): Promise<void> {
		const { studyId } = this.cast;
		const screening = await addScreening(cast.coordinator, studyId, {
			siteId: cast.id,
			screenedOn: day
		});
		await answerEligibility(
			cast.coordinator,
			studyId,
			screening.id,
			{ answers: this.metAnswers() },
			screening.version
		);
	}

	private metAnswers = (): Record<string, 'yes' | 'no'> =>
		Object.fromEntries(
			this.cast.criteria.map((each) => [each.key, each.kind === 'inclusion' ? 'yes' : 'no'])
		);

	/** The investigator signs in, signs what waits (or one checklist of it), and signs out. */
	private async signWaiting({ investigator }: SiteCast, only?: string): Promise<void> {
		const { studyId } = this.cast;
		const { personId, name, email, requestId } = investigator;
		const sessionId = await startSession({ id: personId, name, email }, 'password', '', requestId);
		const actor = { ...investigator, sessionId };
		const items = (await findWaiting(actor, studyId)).items.filter(
			(item) => only === undefined || item.recordId === only
		);
		await sign(actor, studyId, {
			items: items.map(({ record, recordId, meaning, sha256 }) => ({
				record,
				recordId,
				meaning,
				sha256
			})),
			email,
			password: demoPassword
		});
		await endSession(actor, sessionId);
	}

	private async turnAway(site: number, on: PlainDate, reason: string): Promise<void> {
		const { id: siteId, coordinator } = this.site(site);
		const screening = await addScreening(coordinator, this.cast.studyId, {
			siteId,
			screenedOn: on
		});
		await closeScreening(coordinator, this.cast.studyId, screening.id, reason, screening.version);
	}

	private async enrol(subject: StorySubject, arrives: Date): Promise<void> {
		const { studyId } = this.cast;
		const { id: siteId, coordinator } = this.site(subject.site);
		const screening = await addScreening(coordinator, studyId, {
			siteId,
			screenedOn: subject.enrolsOn
		});
		await recordConsent(coordinator, studyId, screening.id, {
			consentVersionId: this.cast.consentVersionId,
			signedOn: subject.enrolsOn,
			signedTime: '08:02',
			obtainedOn: subject.enrolsOn,
			obtainedTime: '08:03',
			relationship: '',
			witnessed: false,
			minor: false,
			assent: '' as const,
			assentReason: '',
			explainedBy: coordinator.personId,
			signedBy: 'participant',
			copyGiven: true
		});
		const answered = await answerEligibility(
			coordinator,
			studyId,
			screening.id,
			{ answers: this.metAnswers() },
			screening.version
		);
		await this.signWaiting(this.site(subject.site), screening.id);
		const entered = await enrolSubject(
			coordinator,
			studyId,
			screening.id,
			{
				enrolledOn: subject.enrolsOn,
				stratum: { 'kidney-function': subject.egfr < 45 ? 'below-45' : 'from-45' },
				characteristics: { sex: subject.sex, 'birth-date': subject.birthDate },
				contact: {
					name: subject.name,
					email: subject.email
						? `${subject.name.toLowerCase().replace(/[^a-z]+/g, '.')}@post.example`
						: '',
					phone: '',
					language: 'en'
				}
			},
			answered.version
		);
		await randomiseSubject(coordinator, studyId, entered.id);
		const slows = await this.isSlowed(entered.id);
		const visits = await this.plannedVisits(entered.id);
		visits.forEach((visit, number) => {
			const story = subject.visits[number];
			if (story) this.plan(subject, slows, visit, story, number, minutesLater(arrives, 40));
		});
		if (subject.leaves) {
			const day = addDays(subject.enrolsOn, subject.leaves.afterDays);
			const { kind } = subject.leaves;
			this.diary.add(subject.site, this.local(subject.site, day, '16:00'), async () => {
				if (kind === 'lost to follow-up')
					for (const outcome of ['no answer', 'message left'] as const)
						await logContact(coordinator, studyId, visits[1]?.id ?? '', {
							way: 'telephone',
							outcome,
							nextStep: '',
							tryAgainOn: ''
						});
				await recordExit(coordinator, studyId, entered.id, {
					kind,
					happenedOn: day,
					reason: kind === 'lost to follow-up' ? 'No answer to calls and a letter.' : ''
				});
			});
		}
	}

	private async isSlowed(subjectId: string): Promise<boolean> {
		const { rows } = await sql<{ arm_key: string }>`
			select arm_key from closed.list_position where subject_id = ${subjectId}::uuid`.execute(
			this.cast.unmasked.kysely
		);
		return rows[0]?.arm_key === 'b';
	}

	private plannedVisits(subjectId: string): Promise<PlannedRow[]> {
		return readOwn(systemActor('demo'), async (reader) => {
			const { rows } = await sql<PlannedRow>`
				select v.id, p.key, v.version, v.earliest, v.target, v.latest, p.length_minutes as minutes,
					(select jsonb_agg(jsonb_build_object('id', m.id, 'key', m.key) order by m.position)
						from app.planned_measure pm join app.measure m on m.id = pm.measure_id
						where pm.planned_visit_id = p.id and m.kind <> 'derived') as measures
				from app.visit v join app.planned_visit p on p.id = v.planned_visit_id
				where v.subject_id = ${subjectId}::uuid order by v.position`.execute(reader);
			return rows;
		});
	}

	/** Puts what becomes of a visit into the diary: a booking, perhaps a move, the visit; or calls and a miss. */
	private plan(
		subject: StorySubject,
		slows: boolean,
		visit: PlannedRow,
		story: StoryVisit,
		number: number,
		notBefore: Date
	): void {
		if (number === 0) {
			// The baseline is measured on the day of enrolment itself.
			this.diary.add(subject.site, notBefore, () =>
				this.measure(subject, slows, visit, story, notBefore)
			);
			return;
		}
		const { site } = subject;
		const gone =
			subject.leaves && subject.leaves.kind !== 'intervention discontinued'
				? addDays(subject.enrolsOn, subject.leaves.afterDays)
				: null;
		const closesNow =
			addDays(this.today, -12) <= visit.latest && visit.latest <= addDays(this.today, 4);
		if (story.fate === 'missed' || (story.waits && closesNow)) {
			this.chase(subject, visit, gone);
			return;
		}
		const side =
			story.fate === 'early' ? visit.earliest : story.fate === 'late' ? visit.latest : visit.target;
		const beyond =
			story.fate === 'early' ? -story.beyond : story.fate === 'late' ? story.beyond : 0;
		const half =
			story.place < 0
				? daysBetween(visit.earliest, visit.target)
				: daysBetween(visit.target, visit.latest);
		const wished =
			story.fate === 'kept'
				? addDays(visit.target, Math.round(story.place * half))
				: addDays(side, beyond);
		const inside = (day: PlainDate) => visit.earliest <= day && day <= visit.latest;
		const day = workingDay(wished, (each) => (story.fate === 'kept') === inside(each));
		if (!day || (gone && day >= gone)) return;
		const booking = this.local(site, addDays(day, -story.bookedAhead), '14:30');
		const bookedAt = booking > notBefore ? booking : minutesLater(notBefore, 90);
		const outside =
			story.fate === 'kept' ? '' : story.fate === 'late' ? 'Away until then.' : 'Away afterwards.';
		this.diary.add(subject.site, bookedAt, () =>
			this.book(subject, slows, visit, story, day, outside)
		);
	}

	private async book(
		subject: StorySubject,
		slows: boolean,
		visit: PlannedRow,
		story: StoryVisit,
		day: PlainDate,
		outsideReason: string
	): Promise<void> {
		const { studyId } = this.cast;
		const { coordinator, pairs } = this.site(subject.site);
		const wish = 8 * 60 + ((visit.minutes * 7) % 360);
		let place = this.places.find(subject.site, day, visit.minutes, wish);
		if (!place) return;
		const input = (on: PlainDate, chosen: NonNullable<typeof place>) => ({
			date: on,
			time: chosen.time,
			roomId: pairs[chosen.pair]?.roomId ?? '',
			staffId: pairs[chosen.pair]?.nurse.personId ?? '',
			outsideReason
		});
		const booked = await bookVisit(
			coordinator,
			studyId,
			visit.id,
			visit.version,
			input(day, place)
		);
		if (story.moved) {
			const other = this.places.find(subject.site, day, visit.minutes, 13 * 60 + 15);
			if (other) {
				this.places.free(subject.site, day, place.pair, place.time);
				await moveAppointment(coordinator, studyId, visit.id, booked.version, input(day, other));
				place = other;
			}
		}
		const nurse = pairs[place.pair]?.nurse as Actor;
		const starts = this.local(subject.site, day, place.time);
		this.diary.add(subject.site, starts, () =>
			this.measure(subject, slows, { ...visit, version: booked.visitVersion }, story, starts, nurse)
		);
	}

	private async measure(
		subject: StorySubject,
		slows: boolean,
		visit: PlannedRow,
		story: StoryVisit,
		starts: Date,
		nurse: Actor = this.site(subject.site).pairs[0]?.nurse as Actor
	): Promise<void> {
		const { studyId } = this.cast;
		const begun = await startVisit(nurse, studyId, visit.id, visit.version);
		const days = daysBetween(subject.enrolsOn, begun.happenedOn);
		const age = ageInYears(plainDateOf(subject.birthDate), begun.happenedOn, '28 February');
		const egfr = trueEgfr(subject, slows, days, story.noise.egfr);
		const systolic = subject.systolic + story.noise.systolic - days / 200;
		const diastolic = subject.diastolic + story.noise.diastolic - days / 300;
		const three = (value: number) => [3, -2, 0].map((step) => String(Math.round(value + step)));
		const entries: Record<string, Parameters<typeof recordMeasurement>[5]['entry']> = {
			creatinine: { kind: 'value', value: String(creatinineFor(egfr, age, subject.sex)) },
			systolic: { kind: 'readings', values: three(systolic) },
			diastolic: { kind: 'readings', values: three(diastolic) },
			weight: {
				kind: 'value',
				value: (subject.weight + story.noise.weight - days / 400).toFixed(1)
			},
			potassium: { kind: 'value', value: (subject.potassium + story.noise.potassium).toFixed(1) }
		};
		if (story.notDone) entries[story.notDone] = { kind: 'not done', reason: 'Not enough time' };
		for (const [n, measure] of visit.measures.entries()) {
			const entry = entries[measure.key];
			if (!entry) continue;
			at(minutesLater(starts, 4 + 4 * n));
			await recordMeasurement(nurse, studyId, visit.id, measure.id, null, {
				entry,
				softAnswer: 'Measured again: the same.',
				comment: '',
				reason: ''
			});
		}
		at(minutesLater(starts, 6 + 4 * visit.measures.length));
		await finishVisit(nurse, studyId, visit.id, begun.version);
		const apart = visit.measures.find((each) => each.key === tellingMeasure.key);
		if (apart) this.sendToPharmacist(subject, slows, visit.id, apart.id, begun.happenedOn);
	}

	/** The laboratory answers the pharmacist two days later; nobody else at the site sees the value. */
	private sendToPharmacist(
		subject: StorySubject,
		slows: boolean,
		visitId: string,
		measureId: string,
		on: PlainDate
	): void {
		const { pharmacist } = this.site(subject.site);
		const level = 0.3 + (subject.weight % 7) / 10 + (slows ? 42 + (subject.weight % 11) : 0);
		this.diary.add(subject.site, this.local(subject.site, addDays(on, 2), '16:40'), async () => {
			await recordMeasurement(pharmacist, this.cast.studyId, visitId, measureId, null, {
				entry: { kind: 'value', value: level.toFixed(1) },
				softAnswer: '',
				comment: '',
				reason: ''
			});
		});
	}

	private chase(subject: StorySubject, visit: PlannedRow, gone: PlainDate | null): void {
		const { studyId } = this.cast;
		const { coordinator } = this.site(subject.site);
		if (gone && visit.latest >= gone) return;
		const call = (day: PlainDate, outcome: 'no answer' | 'message left', nextStep: string) =>
			this.diary.add(subject.site, this.local(subject.site, day, '11:20'), async () => {
				await logContact(coordinator, studyId, visit.id, {
					way: 'telephone',
					outcome,
					nextStep,
					tryAgainOn: ''
				});
			});
		call(addDays(visit.latest, -2), 'no answer', 'Call again in the evening.');
		call(addDays(visit.latest, 3), 'message left', 'Wait for the call back.');
		this.diary.add(
			subject.site,
			this.local(subject.site, addDays(visit.latest, 18), '10:05'),
			async () => {
				await declareMissed(coordinator, studyId, visit.id, visit.version, {
					reason: 'Could not be reached before the window closed.'
				});
			}
		);
	}
}
