import { createContext } from 'svelte';
import { SvelteMap } from 'svelte/reactivity';
import type { StudyDefinition } from '$lib/domain/study/definition';
import { applyEdits } from '$lib/domain/study/edits';
import type { Edit } from '$lib/domain/study/edits.input';
import { clash } from '$lib/domain/study/places';
import type { ShownFinding } from '$lib/domain/study/shown-findings';
import { api, ApiRefusal } from './api';
import { ItemForm, type Fields } from './item-form.svelte';

interface Change {
	who: string;
	own: boolean;
	at: string;
	says: string[];
}
interface News {
	id: string;
	version: number;
	status: 'draft' | 'published';
	definition: StudyDefinition | null;
	changes: Change[];
	findings: ShownFinding[];
}
interface Kept {
	version: number;
	inverse: Edit[];
	findings: ShownFinding[];
}

export interface OpenDraft {
	studyId: string;
	id: string;
	version: number;
	definition: StudyDefinition;
	findings: ShownFinding[];
}

export type Outcome =
	{ kept: true } | { kept: false; fields: Record<string, string>; message: string };

/** An edit that came too late, with what others changed meanwhile. */
export interface Conflict {
	edits: Edit[];
	changes: Change[];
	/** Others set the very same thing. */
	same: boolean;
	/** Why it cannot be applied any more, or null when it can. */
	cannot: string | null;
	kind: Kind;
}
type Kind = 'edit' | 'undo' | 'redo';

const pollEveryMs = 4000;
const mostSteps = 200;

/**
 * A draft on an open screen: what is kept, what is on its way, what others changed meanwhile, and the way back. Edits are
 * shown at once and sent one after the other; each names the version it was made on, so nothing is overwritten unseen.
 */
export class DraftDesk {
	readonly studyId: string;
	readonly id: string;
	version = $state(0);
	findings = $state.raw<ShownFinding[]>([]);
	/** Others' changes that have come in, until they are put aside. */
	news = $state.raw<Change[]>([]);
	conflict = $state.raw<Conflict | null>(null);
	refused = $state<string | null>(null);
	published = $state(false);
	said = $state('');
	/** The draft as the server has it: what forms begin from. */
	kept = $state.raw<StudyDefinition>({} as StudyDefinition);
	/** What is typed about items and not kept yet, by place; it outlasts going from one part to another. */
	readonly forms = new SvelteMap<string, ItemForm>();
	#sending = $state.raw<{ edits: Edit[] }[]>([]);
	#undo = $state.raw<Edit[][]>([]);
	#redo = $state.raw<Edit[][]>([]);
	#chain: Promise<unknown> = Promise.resolve();

	/** The draft as it will stand once what is on its way has arrived. */
	get definition(): StudyDefinition {
		if (this.#sending.length === 0) return this.kept;
		const shown = applyEdits(
			this.kept,
			this.#sending.flatMap(({ edits }) => edits)
		);
		return shown.ok ? shown.value : this.kept;
	}
	get saving(): boolean {
		return this.#sending.length > 0;
	}
	get mayUndo(): boolean {
		return this.#undo.length > 0 && !this.saving;
	}
	get mayRedo(): boolean {
		return this.#redo.length > 0 && !this.saving;
	}
	get typing(): boolean {
		return [...this.forms.values()].some((form) => form.dirty);
	}

	constructor(open: OpenDraft) {
		this.studyId = open.studyId;
		this.id = open.id;
		this.version = open.version;
		this.findings = open.findings;
		this.kept = open.definition;
	}

	/** What is typed about an item, begun from what is kept of it. */
	formOf(place: string, item: Fields): ItemForm {
		return this.forms.get(place) ?? new ItemForm(item);
	}

	#address = (rest = '') => `/api/studies/${this.studyId}/protocol${rest}`;

	/** Sends edits; says whether they were kept, or beside which fields they were refused. */
	apply(edits: Edit[], kind: Kind = 'edit'): Promise<Outcome> {
		const onItsWay = { edits };
		this.#sending = [...this.#sending, onItsWay];
		const sent = this.#chain.then(() => this.#send(onItsWay, kind));
		this.#chain = sent;
		return sent;
	}

	async #send(onItsWay: { edits: Edit[] }, kind: Kind): Promise<Outcome> {
		const { edits } = onItsWay;
		const over = () => {
			this.#sending = this.#sending.filter((each) => each !== onItsWay);
		};
		this.refused = null;
		try {
			const kept = await api<Kept>(this.#address(), {
				method: 'PATCH',
				body: { edits },
				version: this.version
			});
			const next = applyEdits(this.kept, edits);
			if (next.ok) this.kept = next.value;
			this.version = kept.version;
			this.findings = kept.findings;
			over();
			this.#remember(kept.inverse, kind);
			return { kept: true };
		} catch (error) {
			over();
			if (!(error instanceof ApiRefusal)) {
				this.refused = 'The server could not be reached. Nothing was kept: try again.';
				return { kept: false, fields: {}, message: this.refused };
			}
			if (error.status === 412) await this.#meet(edits, kind);
			else this.refused = error.message;
			return { kept: false, fields: error.fields, message: error.message };
		}
	}

	#remember(inverse: Edit[], kind: Kind) {
		if (inverse.length === 0) return;
		if (kind === 'undo') this.#redo = [...this.#redo, inverse];
		else this.#undo = [...this.#undo, inverse].slice(-mostSteps);
		if (kind === 'edit') this.#redo = [];
	}

	/** Takes in what others changed and holds the late edit until the person says what is to become of it. */
	async #meet(edits: Edit[], kind: Kind) {
		const before = this.kept;
		const news = await this.#ask().catch(() => null);
		if (!news?.definition) {
			this.refused = 'Somebody changed this draft meanwhile. Nothing of yours was kept: try again.';
			return;
		}
		this.#take(news);
		const tried = applyEdits(news.definition, edits);
		this.conflict = {
			edits,
			kind,
			changes: news.changes,
			same: clash(edits, before, news.definition),
			cannot: tried.ok ? null : tried.problem.message
		};
	}

	#ask = () => api<News>(this.#address(`/changes?since=${this.version}`), { background: true });

	#take(news: News) {
		if (news.id !== this.id || news.status === 'published') {
			this.published = true;
			return;
		}
		if (!news.definition) return;
		this.kept = news.definition;
		this.version = news.version;
		this.findings = news.findings;
	}

	/** Looks whether somebody else changed the draft. What is being typed is left alone. */
	async look(): Promise<void> {
		if (this.saving || this.conflict || this.published || document.visibilityState !== 'visible')
			return;
		const asked = this.version;
		const news = await this.#ask().catch(() => null);
		// An edit of one's own may have gone out while the answer was on its way.
		if (!news || this.saving || this.version !== asked) return;
		this.#take(news);
		if (news.changes.length > 0) this.news = [...this.news, ...news.changes].slice(-10);
	}

	watch(): () => void {
		const timer = setInterval(() => void this.look(), pollEveryMs);
		return () => clearInterval(timer);
	}

	async applyOnTop(): Promise<void> {
		const { conflict } = this;
		if (!conflict) return;
		this.conflict = null;
		if (conflict.kind === 'undo') this.#undo = this.#undo.slice(0, -1);
		if (conflict.kind === 'redo') this.#redo = this.#redo.slice(0, -1);
		const { kept } = await this.apply(conflict.edits, conflict.kind);
		if (kept) this.said = 'Your change is kept on top of theirs.';
	}

	async undo(): Promise<void> {
		const edits = this.#undo.at(-1);
		if (!edits || this.saving) return;
		const { kept } = await this.apply(edits, 'undo');
		if (kept) {
			this.#undo = this.#undo.slice(0, -1);
			this.said = 'Undone.';
		}
	}

	async redo(): Promise<void> {
		const edits = this.#redo.at(-1);
		if (!edits || this.saving) return;
		const { kept } = await this.apply(edits, 'redo');
		if (kept) {
			this.#redo = this.#redo.slice(0, -1);
			this.said = 'Done again.';
		}
	}
}

export const [getDesk, setDesk] = createContext<DraftDesk>();
