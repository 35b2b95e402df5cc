/**
 * What the rules can refuse or ask, and the sentence for each. A rule returns the code with the facts;
 * the sentence says what is wrong and what to do next, and never shows more than the facts it was given.
 */
export type Facts = Readonly<Record<string, string | number>>;

const sentences = {
	// Study definitions
	FILE_NOT_JSON: (f) => `The file is not readable as JSON: ${f.detail}.`,
	FILE_TOO_LARGE: (f) => `The file is larger than ${f.limit} MB: it cannot be a study definition.`,
	FILE_NOT_TEXT: () => 'The file is not readable as UTF-8 text.',
	FILE_OTHER_KIND: (f) =>
		`The file says it is of the kind “${f.kind}”. A study definition says “heddle.study/1”.`,
	FIELD_MISSING: () => 'This is missing.',
	FIELD_UNKNOWN: (f) =>
		`There is no field called “${f.name}” here. Check the spelling or remove it.`,
	FIELD_WRONG: (f) => `${f.detail}`,
	KEY_TWICE: (f) => `“${f.key}” is used more than once. Each ${f.what} needs a key of its own.`,
	ARMS_TOO_FEW: () => 'A masked study needs at least two arms.',
	STRATA_WITHOUT_ARMS: () => 'Strata are used only where there are arms to allocate.',
	ANCHOR_UNKNOWN: (f) => `The anchor “${f.anchor}” is not a visit of this study.`,
	ANCHOR_CYCLE: (f) => `The visit “${f.visit}” is counted, by way of others, from itself.`,
	ANCHOR_WITHOUT_ARMS: () =>
		'This visit is counted from randomisation, but the study has fewer than two arms.',
	WINDOW_MONTHS: () =>
		'A window in months needs a target in months. Give the window in days or weeks.',
	WINDOW_EMPTY: (f) => `The window of “${f.visit}” has no day in it for some starting dates.`,
	WINDOWS_OVERLAP: (f) =>
		`The windows of “${f.first}” and “${f.second}” overlap by ${days(f.days)} when counted from ${f.example}. Narrow one of them.`,
	WINDOW_ONE_DAY: (f) => `The window of “${f.visit}” is one day long. It will be hard to book.`,
	VISITS_OUT_OF_ORDER: (f) =>
		`“${f.second}” stands after “${f.first}” in the order, but its target comes no later.`,
	VISIT_WITHOUT_MEASURES: (f) => `Nothing is measured at “${f.visit}”.`,
	VISIT_UNKNOWN: (f) => `“${f.visit}” is not a visit of this study.`,
	MEASURE_UNKNOWN: (f) => `“${f.measure}” is not a measure of this study.`,
	MEASURE_NEVER_SCHEDULED: (f) => `“${f.measure}” is not measured at any visit.`,
	MEASURE_LISTED_TWICE: (f) => `“${f.measure}” stands twice in the schedule of “${f.visit}”.`,
	PRIMARY_NOT_NUMERIC: (f) => `The primary measure “${f.measure}” is not a number.`,
	PRIMARY_NOT_AT_BASELINE: (f) =>
		`The primary measure “${f.measure}” is not measured at the baseline visit “${f.visit}”.`,
	PRIMARY_ONCE: (f) =>
		`The primary measure “${f.measure}” is measured at one visit only. A change over time needs at least two.`,
	LIMITS_INSIDE_OUT: (f) =>
		`The ${f.kind} limits of “${f.measure}” are inside out: ${f.low} is not below ${f.high}.`,
	LIMITS_SOFT_OUTSIDE_HARD: (f) =>
		`A soft limit of “${f.measure}” (${f.soft}) lies outside its hard limit (${f.hard}), so it can never ask.`,
	LIMITS_MISSING: (f) =>
		`“${f.measure}” has no hard limits, so a slip of the decimal point would be accepted.`,
	UNIT_DOES_NOT_CONVERT: (f) => `“${f.from}” does not convert to “${f.to}”.`,
	READINGS_TOO_FEW: (f) =>
		`“${f.measure}” needs at least ${f.needed} of ${f.readings} readings, which cannot be met.`,
	FORMULA_INPUT_UNKNOWN: (f) => `The formula “${f.formula}” has no input called “${f.input}”.`,
	FORMULA_INPUT_MISSING: (f) => `The formula “${f.formula}” also needs “${f.input}”.`,
	FORMULA_INPUT_KIND: (f) => `“${f.reference}” is not what “${f.input}” needs: ${f.needs}.`,
	FORMULA_CYCLE: (f) => `“${f.measure}” is derived, by way of others, from itself.`,
	FORMULA_INPUT_NOT_AT_VISIT: (f) =>
		`“${f.measure}” is derived at “${f.visit}”, where “${f.input}” is not measured.`,
	REVEALING_MIXED: (f) =>
		`“${f.measure}” could reveal the arm, and “${f.input}”, from which it is derived, is entered by somebody else. Let one role enter both.`,
	REVEALING_PRIMARY: (f) =>
		`The primary measure “${f.measure}” is marked as revealing the arm: no masked look could be made.`,
	REVEALING_COMPARED: (f) =>
		`“${f.lower}” is compared with “${f.higher}”, but not everybody who enters one may know the other.`,
	REVEALING_UNMASKED: (f) =>
		`“${f.measure}” is kept from masked roles although nobody is masked in this study.`,
	MEASURE_HIDDEN: (f) =>
		`“${f.measure}” could reveal the arm: its values are entered by the role it names and not imported.`,
	CHARACTERISTIC_UNKNOWN: (f) => `“${f.characteristic}” is not a characteristic of this study.`,
	OPENING_HOURS_INSIDE_OUT: (f) => `Opens ${f.opens}, closes ${f.closes}: the end is not later.`,
	OPENING_HOURS_OVERLAP: (f) => `Opening hours overlap on day ${f.weekday} of the week.`,
	OPENING_HOURS_MISSING: (f) =>
		`The site “${f.site}” has no opening hours, so nothing can be booked.`,
	OPENING_HOURS_TOO_SHORT: (f) =>
		`“${f.visit}” takes ${f.minutes} minutes, longer than any opening of the site “${f.site}”.`,
	SITES_MISSING: () => 'There is no site yet. Subjects are seen at a site.',
	CONSENT_VERSION_MISSING: () =>
		'There is no consent version yet. Nobody can be enrolled without one.',
	ELIGIBILITY_MISSING: () => 'There are no eligibility criteria.',

	ANCHOR_SELF: (f) =>
		`The visit “${f.visit}” is counted from itself. Count it from enrolment, randomisation or another visit.`,
	VISIT_TOO_LONG: (f) =>
		`“${f.visit}” takes ${f.minutes} minutes; a room is held for at most ${f.most}.`,
	STRATA_TOO_MANY: (f) =>
		`There are ${f.strata} strata for ${f.subjects} planned subjects: some strata will stay empty. Use fewer factors or levels, or minimisation.`,
	STRATA_THIN: (f) =>
		`There are ${f.strata} strata for ${f.subjects} planned subjects, fewer than ${f.least} in each: blocks will seldom be completed.`,
	STRATUM_SITE_EMPTY: (f) =>
		`The site “${f.site}” plans to enrol nobody, so its strata stay empty.`,
	LEVEL_TWICE: (f) =>
		`Two levels of “${f.stratum}” are both called “${f.level}”: one of them can have no subjects.`,
	LEVEL_NOT_A_CHOICE: (f) =>
		`“${f.level}” is a level of “${f.stratum}”, but not one of the choices asked at enrolment: it can have no subjects.`,
	PLAN_SITE_UNKNOWN: (f) => `The enrolment plan names the site ${f.site}, which is not a site.`,
	PLAN_DIFFERS: (f) =>
		`The enrolment plan adds up to ${f.planned} subjects; the study plans ${f.subjects}.`,
	CLOSURE_INSIDE_OUT: (f) =>
		`A closure of the site “${f.site}” ends on ${f.to}, before it begins on ${f.from}.`,
	MINORS_INSIDE_OUT: (f) =>
		`Assent is asked from ${f.assent} years, which is not before majority at ${f.majority}.`,
	MINORS_WITHOUT_BIRTH_DATE: () =>
		'Minors take part, but no date of birth is asked: nobody will know when they come of age.',
	BASELINE_OF_CHANGE: (f) =>
		`“${f.measure}” is a change from “${f.visit}”, where “${f.input}” is not measured.`,
	BASELINE_OF_CHANGE_LATER: (f) =>
		`“${f.measure}” is worked out at “${f.at}”, which comes before its baseline “${f.visit}”.`,

	// Edits of a draft
	EDIT_NO_SUCH: (f) => `There is no ${f.what} “${f.key}” any more.`,
	EDIT_KEY_TAKEN: (f) => `There is another ${f.what} with the key “${f.key}”. Give one of its own.`,
	EDIT_STILL_USED: (f) =>
		`The ${f.what} “${f.name}” cannot be taken away yet. It is still used by ${f.by}.`,
	EDIT_KEY_BY_RENAMING: (f) =>
		`The key of a ${f.what} is changed by renaming it, so that all that refers to it follows.`,
	EDIT_NO_CELL: (f) => `The schedule has no visit “${f.visit}” or no measure “${f.measure}”.`,

	// Numbers of subjects and kits
	SUBJECT_NUMBER_SHAPE: (f) =>
		`“${f.text}” is not a subject number. It has two digits for the site, four for the subject and a check digit: 02-0017-0.`,
	SUBJECT_NUMBER_CHECK_DIGIT: (f) =>
		`“${f.text}” is not a subject number: the last digit does not fit the others. Look for a mistyped or swapped digit.`,
	KIT_NUMBER_SHAPE: (f) => `“${f.text}” is not a kit number.`,
	KIT_NUMBER_CHECK_DIGIT: (f) =>
		`“${f.text}” is not a kit number: the last digit does not fit the others. Read the label again.`,

	// Booking
	OUTSIDE_OPENING_HOURS: (f) => `The site is not open then: ${f.hours}.`,
	SITE_CLOSED: (f) => `The site is closed on ${f.date}.`,
	TIME_TAKEN: (f) => `${f.what} is already taken at that time. Choose another time or place.`,

	// Visits
	VISIT_MOVE_NOT_ALLOWED: (f) => `A visit that is ${f.from} cannot become ${f.to}.`,
	REASON_NEEDED: () => 'Give a reason.',
	WINDOW_NOT_PASSED: (f) =>
		`The window is open until ${f.latest}. A visit is declared missed once it has passed.`,

	// Measurements
	VALUE_MISSING: () => 'Enter a value, or say why it was not done.',
	NOT_A_NUMBER: (f) => `“${f.text}” is not a number.`,
	TOO_MANY_DECIMALS: (f) =>
		f.decimals === 0
			? `“${f.text}” has decimals. Enter a whole number.`
			: `“${f.text}” has more than ${f.decimals} decimal${f.decimals === 1 ? '' : 's'}.`,
	HARD_LIMIT: (f) =>
		`${f.value} is outside what this study accepts (${f.range}). Check the unit and the decimal point.`,
	SOFT_LIMIT: (f) =>
		`${f.value} is possible, but unusual. Check the unit and the decimal point, or measure again.`,
	SOFT_CHANGE: (f) =>
		`${f.value} is an unusual change. Check the unit and the decimal point, or measure again.`,
	UNIT_NOT_ACCEPTED: (f) => `“${f.measure}” is not entered in ${f.unit}.`,
	NOT_A_CHOICE: (f) => `“${f.text}” is not one of the choices.`,
	DATE_SHAPE: (f) => `“${f.text}” is not a date. Write it as year-month-day: 2026-06-09.`,
	DATE_NOT_REAL: (f) => `“${f.text}” is not a date: there is no such day.`,
	DATE_IN_FUTURE: (f) => `${f.text} has not come yet.`,
	TEXT_TOO_LONG: (f) => `The text has ${f.length} characters; ${f.limit} are allowed.`,
	TEXT_NOT_ALLOWED: () => 'The text holds a character that cannot be kept. Type it again.',
	READINGS_WRONG: (f) => `${f.given} of ${f.readings} readings are given; ${f.needed} are needed.`,
	NOT_DONE_REASON: () => 'Choose the reason from the list.',
	DERIVED_NOT_ENTERED: (f) => `“${f.measure}” is worked out from other values and is not entered.`,
	COMPARISON: (f) => `${f.lower} must be below ${f.higher}: ${f.lowerValue} and ${f.higherValue}.`,
	COMPARISON_ABOVE: (f) =>
		`${f.lower} must not be above ${f.higher}: ${f.lowerValue} and ${f.higherValue}.`,
	DERIVED_INPUT_ABSENT: (f) => `“${f.measure}” cannot be worked out: ${f.input} is not there.`,
	DERIVED_OUT_OF_SCOPE: (f) => `“${f.measure}” cannot be worked out: ${f.why}.`,

	// Imports
	IMPORT_TOO_LARGE: (f) => `The file is larger than ${f.limit} MB. Split it, or leave out columns.`,
	IMPORT_TOO_MANY_ROWS: (f) => `The file has more than ${f.limit} rows. Split it.`,
	IMPORT_TOO_MANY_COLUMNS: (f) => `The file has ${f.columns} columns; ${f.limit} are allowed.`,
	IMPORT_EMPTY: () => 'The file has no rows under its header.',
	IMPORT_ENCODING: () => 'The file is not readable as UTF-8 text. Save it as “CSV UTF-8”.',
	HEADER_BLANK: (f) => `Column ${f.position} has no name in the first row.`,
	HEADER_TWICE: (f) => `Two columns are called “${f.column}”.`,
	ROW_LENGTH: (f) => `The row has ${f.cells} cells; the header has ${f.columns}.`,
	QUOTES: () => 'A quotation mark in this row is not closed or stands in the middle of a cell.',
	COLUMN_UNKNOWN: (f) => `The file has no column called “${f.column}”.`,
	COLUMN_TWICE: (f) => `The column “${f.column}” is used for two things.`,
	NAME_TWICE: (f) => `Two columns are to be called “${f.name}”.`,
	MEASURES_MISSING: () => 'Choose at least one column that holds a measure.',
	CELL_NUL: () => 'The cell holds a character that cannot be kept.',
	CELL_TOO_LONG: (f) => `The cell has ${f.length} characters; ${f.limit} are allowed.`,
	CELL_NOT_A_NUMBER: (f) =>
		`“${f.text}” is not a number. Leave the cell empty when the value is missing.`,
	CELL_NOT_FINITE: (f) =>
		`“${f.text}” is not a number that can be kept. Leave the cell empty when the value is missing.`,
	CELL_TOO_LARGE: (f) => `“${f.text}” is too large to be a measurement.`,
	SUBJECT_EMPTY: () => 'The subject is empty.',
	TIME_EMPTY: () => 'The time is empty.',
	ROW_TWICE: (f) => `${f.subject} already has a row for this time: row ${f.first}.`,
	CHARACTERISTIC_CHANGES: (f) =>
		`${f.subject} has “${f.value}” here and “${f.before}” in row ${f.first}. It must stay the same for a subject.`,
	ALLOCATION_IN_MASKED_STUDY: (f) =>
		`“${f.column}” holds the allocation, and this study is masked. Leave it out here: the independent statistician loads it.`,
	LOOKS_LIKE_ALLOCATION: (f) =>
		`“${f.column}” looks like the allocation, and this study is masked. The independent statistician loads it. If it is something else, rename the column.`,

	SITE_UNKNOWN: (f) => `“${f.text}” is not a site of this study. Its sites: ${f.sites}.`,
	SITE_EMPTY: () => 'The site is empty.',
	VISIT_TWICE: (f) =>
		`${f.subject} already has a row for the visit “${f.visit}”: row ${f.first}. A planned visit takes place once.`,
	VISITS_TOO_MANY: (f) =>
		`The file has ${f.count} different ${f.what}; ${f.limit} are allowed. Map a column of visit labels.`,
	LEVELS_WRONG: (f) =>
		`“${f.name}” has ${f.count} different values; a characteristic in words has 2 to ${f.limit}.`,
	LEVEL_UNKNOWN: (f) => `“${f.text}” is not one of the choices of “${f.name}” in this study.`,
	CHARACTERISTICS_TOO_MANY: (f) => `${f.count} characteristics are mapped; ${f.limit} are allowed.`,
	MEASURE_DIFFERS: (f) =>
		`“${f.name}” is measured in ${f.unit} with ${f.decimals} decimals in this study.`,
	TIME_UNIT_DIFFERS: (f) => `This study counts time in ${f.unit}s. Give the file’s time in them.`,
	IMPORTED_BEFORE: (f) => `${f.subject} already has a visit at this time in the study.`,
	SUBJECT_DIFFERS: (f) => `${f.subject} stands in the study with another value of “${f.name}”.`,
	SITE_FULL: (f) => `The site ${f.site} has no room for ${f.count} more subject numbers.`,

	// Calendar files
	CALENDAR_TEXT: (f) => `The ${f.field} holds a line break or a character that cannot be sent.`,
	CALENDAR_TIMES: () => 'The end is not later than the start.',
	CALENDAR_UID: () => 'The event has no proper identifier.',
	CALENDAR_ADDRESS: (f) => `“${f.text}” is not an e-mail address.`,

	// Passwords
	PASSWORD_TOO_SHORT: (f) => `Use at least ${f.least} characters. A few unrelated words work well.`,
	PASSWORD_TOO_LONG: (f) => `Use at most ${f.most} characters.`,
	PASSWORD_COMMON: () =>
		'This password is easily guessed. Choose another, such as a few unrelated words.',
	PASSWORD_CONTEXT: () =>
		'This password is made of your name, your address or the name of the program. Choose another.'
} as const satisfies Record<string, (facts: Facts) => string>;

function days(count: string | number | undefined): string {
	return `${count} day${count === 1 ? '' : 's'}`;
}

export type ProblemCode = keyof typeof sentences;

export type Problem<Code extends ProblemCode = ProblemCode> = {
	code: Code;
	message: string;
	facts: Facts;
};

export function problem<Code extends ProblemCode>(code: Code, facts: Facts = {}): Problem<Code> {
	return { code, message: sentences[code](facts), facts };
}

export type Result<T, P = Problem> = { ok: true; value: T } | { ok: false; problem: P };

export const good = <T>(value: T): { ok: true; value: T } => ({ ok: true, value });
export const bad = <P>(refusal: P): { ok: false; problem: P } => ({ ok: false, problem: refusal });
