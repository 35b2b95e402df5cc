import type { PlainDate } from '$lib/time/dates';
import type { VisitWindow } from '../schedule/window';
import type { Measure, RevealingRole, StudyDefinition } from '../study/definition';
import type { VisitStatus } from '../visit/status';
import type { DeriveContext } from './derive';

/** A saved value as a page shows it; instants come with their zone. */
export interface KeptValue {
	version: number;
	/** In the measure's own unit. */
	value: number | null;
	text: string | null;
	readings: number[] | null;
	enteredValue: number | null;
	enteredUnit: string | null;
	enteredReadings: number[] | null;
	notDone: string | null;
	softAnswer: string | null;
	comment: string | null;
	/** ISO, for sending back unchanged. */
	takenAt: string | null;
	takenOn: string | null;
	takenTime: string | null;
	takenText: string | null;
	enteredText: string;
	takenBy: string;
	source: 'form' | 'import' | 'derived';
}

export interface MeasureView {
	measureId: string;
	measure: Measure;
	/** Whether who reads this enters it as well. */
	mayEnter: boolean;
	/** The one role, besides, that sees it. */
	openTo: RevealingRole | null;
	kept: KeptValue | null;
	/** Oldest first; empty where the measure does not let them be seen now. */
	earlier: { visit: string; value: number }[];
}

export interface VisitForm {
	visit: {
		id: string;
		subjectId: string;
		number: string;
		name: string;
		status: VisitStatus;
		version: number;
		happenedOn: PlainDate | null;
		happenedText: string | null;
		missedReason: string | null;
		window: VisitWindow | null;
		placeText: string;
		site: string;
		zone: string;
		today: PlainDate;
		/** The subject's visits have ended. */
		left: boolean;
	};
	may: {
		measure: boolean;
		/** Enters something at this visit, though not what is measured by the others. */
		record: boolean;
		book: boolean;
		chase: boolean;
	};
	measures: MeasureView[];
	others: number;
	comparisons: StudyDefinition['comparisons'];
	characteristics: DeriveContext['characteristics'];
}
