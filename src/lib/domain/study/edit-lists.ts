/** The lists of a definition that are edited item by item. */
export const editedLists = [
	'arms',
	'strata',
	'sites',
	'characteristics',
	'visits',
	'measures',
	'comparisons',
	'consentVersions',
	'eligibility'
] as const;
export type EditedList = (typeof editedLists)[number];

/** What a study says once, beside its lists. */
export const factFields = [
	'code',
	'name',
	'masked',
	'plannedSubjects',
	'stratifyBySite',
	'allocation',
	'enrolmentPlan',
	'baselineVisit',
	'primaryMeasure',
	'timeUnit',
	'minors',
	'lostAfterAttempts',
	'adverseEvents',
	'eligibilitySigned'
] as const;
export type FactField = (typeof factFields)[number];
