import { api, ApiRefusal } from '$lib/client/api';
import { assess, type Assessed, type Entry } from '$lib/domain/measurement/assess';
import type { KeptValue, MeasureView } from '$lib/domain/measurement/visit-form';
import type { PlainDate } from '$lib/time/dates';
import { plainDateOf } from '$lib/time/dates';
import { instantFromLocal } from '$lib/time/zones';

/** What is in the fields and not yet what is kept. */
export interface Draft {
	notDone: boolean;
	/** One text, or one for each reading. */
	texts: string[];
	unit: string;
	notDoneReason: string;
	comment: string;
	takenOn: string;
	takenTime: string;
	/** Whether the time of observation was given by hand. */
	timed: boolean;
}

export type EntryState =
	| 'idle'
	| 'typing'
	| 'saving'
	/** Possible but unusual: the person looks again. */
	| 'asking'
	/** A saved value changes: why? */
	| 'reason'
	| 'refused'
	/** No network: it stays in the field and is sent again. */
	| 'waiting'
	/** Somebody else entered it meanwhile. */
	| 'clash';

interface Given {
	view: () => MeasureView;
	url: () => string;
	today: () => PlainDate;
	zone: () => string;
	/** The visit is over: each change needs a reason. */
	over: () => boolean;
	/** Brings in what is kept now; whether that worked. */
	refresh: () => Promise<boolean>;
}

const retryMs = 5_000;

/** The text fields of a kept value, as they were typed. */
function textsOf(view: MeasureView): string[] {
	const { measure, kept } = view;
	const many = measure.kind === 'repeated' ? measure.readings : 1;
	const typed =
		kept?.enteredReadings ??
		(kept?.enteredValue != null ? [kept.enteredValue] : kept?.value != null ? [kept.value] : []);
	const texts =
		measure.kind === 'number' || measure.kind === 'repeated'
			? typed.map((value) =>
					kept?.enteredUnit === measure.unit ? value.toFixed(measure.decimals) : String(value)
				)
			: [kept?.text ?? ''];
	return Array.from({ length: many }, (_, at) => texts[at] ?? '');
}

export function draftOf(view: MeasureView): Draft {
	const { measure, kept } = view;
	return {
		notDone: kept?.notDone != null,
		texts: textsOf(view),
		unit: kept?.enteredUnit ?? ('unit' in measure ? measure.unit : ''),
		notDoneReason: kept?.notDone ?? '',
		comment: kept?.comment ?? '',
		takenOn: kept?.takenOn ?? '',
		takenTime: kept?.takenTime ?? '',
		timed: false
	};
}

/** One measure of the visit between the fingers and the server. A value that is not saved never leaves the field. */
export class MeasureEntry {
	#draft = $state<Draft | null>(null);
	status = $state<EntryState>('idle');
	said = $state('');
	reason = $state('');
	#timer: ReturnType<typeof setTimeout> | undefined;
	#softAnswer = '';
	readonly #given: Given;

	constructor(given: Given) {
		this.#given = given;
	}

	get view(): MeasureView {
		return this.#given.view();
	}
	get kept(): KeptValue | null {
		return this.view.kept;
	}
	/** What the fields show: the draft, or what is kept. */
	get shown(): Draft {
		return this.#draft ?? draftOf(this.view);
	}
	/** Nothing is on its way and nothing waits. */
	get settled(): boolean {
		return this.status === 'idle';
	}
	get waiting(): boolean {
		return this.status === 'waiting';
	}

	change(part: Partial<Draft>): void {
		this.#draft = { ...this.shown, ...part };
		this.#softAnswer = '';
		this.said = '';
		this.status = 'typing';
	}

	putBack(): void {
		clearTimeout(this.#timer);
		this.#draft = null;
		this.#softAnswer = '';
		this.reason = '';
		this.said = '';
		this.status = 'idle';
	}

	/** The entry the fields hold, or null while they hold none. */
	get entry(): Entry | null {
		const { notDone, notDoneReason, texts, unit } = this.shown;
		const { kind } = this.view.measure;
		if (notDone) return notDoneReason === '' ? null : { kind: 'not done', reason: notDoneReason };
		if (texts.every((text) => text.trim() === '')) return null;
		const given = unit === '' ? {} : { unit };
		if (kind === 'repeated') {
			const filled = [...texts];
			while (filled.at(-1)?.trim() === '') filled.pop();
			return { kind: 'readings', values: filled, ...given };
		}
		return { kind: 'value', value: texts[0] ?? '', ...given };
	}

	/** What the fields mean, where it can be kept: for what is worked out from it. */
	get assessed(): Assessed | null {
		const { entry } = this;
		if (!entry) return null;
		const verdict = assess(this.view.measure, entry, { today: this.#given.today() });
		return verdict.result === 'refused' ? null : verdict.value;
	}

	/** Readings still open are no reason to complain: the person is still measuring. */
	get unfinished(): boolean {
		const { measure } = this.view;
		const { texts, notDone } = this.shown;
		return (
			measure.kind === 'repeated' &&
			!notDone &&
			texts.filter((text) => text.trim() !== '').length < measure.readingsNeeded
		);
	}

	#changesKept(): boolean {
		const before = draftOf(this.view);
		const now = this.shown;
		const same =
			before.notDone === now.notDone &&
			(now.notDone
				? before.notDoneReason === now.notDoneReason
				: before.unit === now.unit &&
					before.texts.every((text, at) => text.trim() === (now.texts[at] ?? '').trim()));
		return !same;
	}

	/** Called when a field is left: keeps what is in it, if it is anything new. */
	async leave(): Promise<void> {
		if (!this.#draft || this.status === 'saving') return;
		const before = draftOf(this.view);
		const untouched =
			!this.#changesKept() && before.comment === this.shown.comment && !this.shown.timed;
		if (untouched) return this.putBack();
		const { entry } = this;
		if (!entry) {
			if (this.kept)
				return this.#refuse('A saved value is not emptied. Say “not done” with a reason.');
			// Nothing to keep yet: a comment alone, or a reason still to choose.
			if (!this.shown.notDone && this.shown.comment === '') this.putBack();
			return;
		}
		if (this.unfinished) return;
		const verdict = assess(this.view.measure, entry, { today: this.#given.today() });
		if (verdict.result === 'refused') return this.#refuse(verdict.problem.message);
		if (this.kept && (this.#changesKept() || this.#given.over()) && this.reason.trim() === '') {
			this.status = 'reason';
			return;
		}
		await this.#send(entry);
	}

	/** The person has looked again at an unusual value and stands by it. */
	async standBy(answer: string): Promise<void> {
		this.#softAnswer = answer;
		if (this.entry) await this.#send(this.entry);
	}

	/** A first entry or a change whose reason was given. */
	async save(): Promise<void> {
		this.status = 'typing';
		await this.leave();
	}

	#refuse(sentence: string): void {
		this.status = 'refused';
		this.said = sentence;
	}

	#takenAt(): string | undefined {
		const { timed, takenOn, takenTime } = this.shown;
		if (timed && takenOn !== '' && takenTime !== '')
			return instantFromLocal(plainDateOf(takenOn), takenTime, this.#given.zone()).toISOString();
		// Putting a slip right does not move the moment of observation.
		return this.kept?.takenAt ?? undefined;
	}

	async #send(entry: Entry): Promise<void> {
		clearTimeout(this.#timer);
		this.status = 'saving';
		this.said = '';
		const sent = this.#draft;
		try {
			await api(this.#given.url(), {
				method: 'PUT',
				version: this.kept?.version,
				body: {
					entry,
					softAnswer: this.#softAnswer,
					comment: this.shown.comment,
					takenAt: this.#takenAt(),
					reason: this.reason
				}
			});
		} catch (thrown) {
			return this.#notKept(thrown);
		}
		// Kept, but the page could not be told: sending it again finds it kept.
		if (!(await this.#given.refresh())) return this.#later();
		// Typed on meanwhile: that is the next thing to keep.
		if (this.#draft !== sent) {
			this.status = 'typing';
			return;
		}
		this.putBack();
	}

	async #notKept(thrown: unknown): Promise<void> {
		if (!(thrown instanceof ApiRefusal) || thrown.status >= 500 || thrown.status === 423) {
			return this.#later();
		}
		if (thrown.code === 'SOFT_LIMIT') {
			this.status = 'asking';
			this.said = thrown.message;
		} else if (thrown.code === 'REASON_NEEDED') this.status = 'reason';
		else if (thrown.code === 'STALE' || thrown.code === 'VERSION_NEEDED') {
			if (!(await this.#given.refresh())) return this.#later();
			// What stands there may be this very entry, whose answer was lost on the way.
			if (this.#changesKept()) this.status = 'clash';
			else this.putBack();
		} else this.#refuse(Object.values(thrown.fields)[0] ?? thrown.message);
	}

	#later(): void {
		this.status = 'waiting';
		this.#timer = setTimeout(() => void this.retry(), retryMs);
	}

	async retry(): Promise<void> {
		if (this.status === 'waiting' && this.entry) await this.#send(this.entry);
	}

	stop(): void {
		clearTimeout(this.#timer);
	}
}
