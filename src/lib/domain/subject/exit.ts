/** Ways out of a study. They differ in what may still be collected, so none stands for another. */
export const exitKinds = [
	'intervention discontinued',
	'stopped visits',
	'consent withdrawn',
	'lost to follow-up',
	'died',
	'completed'
] as const;
export type ExitKind = (typeof exitKinds)[number];

/** What each means for the subject's record, in words for the person who chooses. */
export const exitMeanings: Record<ExitKind, string> = {
	'intervention discontinued': 'The treatment stops; the visits go on.',
	'stopped visits': 'No more visits; what was collected stays.',
	'consent withdrawn': 'Nothing more may be collected; what was collected before stays.',
	'lost to follow-up': 'No contact after attempts that are logged here.',
	died: 'The subject has died. Report it by the study’s safety route as well.',
	completed: 'All visits are over, as planned.'
};

/** Whether the subject's visits end with it. */
export const endsVisits = (kind: string): boolean => kind !== 'intervention discontinued';
