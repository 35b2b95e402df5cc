/**
 * Expected refusals: a closed list of codes, each with its status and its sentence. A refusal carries facts; the
 * sentence is made from them in one place, so that every screen, the API and the log say the same.
 */
type Facts = Record<string, string | number | boolean | null | undefined>;
interface Entry {
	status: number;
	say: (facts: Facts) => string;
}

export const refusals = {
	NOT_FOUND: { status: 404, say: () => 'There is nothing here, or it is not yours to see.' },
	NOT_PERMITTED: { status: 403, say: () => 'Your role does not allow this.' },
	NOT_SIGNED_IN: { status: 401, say: () => 'Please sign in.' },
	LOCKED: {
		status: 423,
		say: () => 'The screen was locked. Enter your password to go on; what you typed is kept.'
	},
	INVALID: { status: 400, say: () => 'Some fields need another look.' },
	/** A domain rule's own sentence (see domain/problems.ts). */
	RULE: { status: 422, say: (f) => String(f.why) },
	NOT_JSON: { status: 400, say: () => 'The request’s body is not valid JSON.' },
	TOO_LARGE: { status: 413, say: (f) => `That is too large: at most ${f.limit}.` },
	WRONG_TYPE: { status: 415, say: (f) => `Send ${f.wanted}.` },
	CROSS_SITE: {
		status: 403,
		say: () => 'This request came from another site and was not carried out.'
	},
	VERSION_NEEDED: {
		status: 428,
		say: () =>
			'Say which version you are changing (If-Match), so that nobody’s work is overwritten.'
	},
	STALE: {
		status: 412,
		say: () =>
			'Somebody changed this since you opened it. Nothing was overwritten: look at it again and repeat your change.'
	},
	/** An edit of a draft that somebody else edited meanwhile. */
	DRAFT_CHANGED: {
		status: 412,
		say: (f) =>
			`${f.who} changed this draft meanwhile: ${f.what} Nothing of yours was kept or lost yet: look at it and apply your change again.`
	},
	SITE_STAYS: {
		status: 422,
		say: (f) =>
			`The site “${f.site}” has been part of a published version: it stays, with its records.`
	},
	SITE_IN_USE: {
		status: 409,
		say: () =>
			'A site or consent version that is to go is still in use: people have roles at the site, or records refer to it. End those first.'
	},
	CONFLICT: {
		status: 409,
		say: (f) => String(f.what ?? 'This clashes with something already there.')
	},
	THROTTLED: {
		status: 429,
		say: (f) => `Too many tries. Wait ${f.minutes ?? 'a few'} minutes and try again.`
	},
	REASON_NEEDED: { status: 422, say: () => 'Say why the saved value changes.' },
	BAD_LINK: {
		status: 410,
		say: () => 'This link was used already or is too old. Ask for a new one.'
	},
	WEAK_PASSWORD: { status: 422, say: (f) => String(f.why) },
	EMAIL_TAKEN: { status: 409, say: () => 'There is an account with this e-mail address already.' },
	ROLE_PAIR: {
		status: 409,
		say: (f) => `These roles may not meet in one person. ${f.why ?? ''}`.trim()
	},
	OWN_GRANT: { status: 403, say: () => 'Nobody grants a role to himself.' },
	OWN_ACCOUNT: {
		status: 403,
		say: () => 'Nobody switches off the own account or administration: another administrator does.'
	},
	NO_INVITATION: {
		status: 409,
		say: () => 'This account needs no invitation: it has a password already, or is switched off.'
	},
	SECOND_PERSON: {
		status: 403,
		say: () => 'This needs a second person: somebody other than who began it.'
	},
	ROLE_PLACE: { status: 422, say: (f) => String(f.why) },
	CODE_TAKEN: { status: 409, say: (f) => `There is a study with the code ${f.code} already.` },
	NOT_DRAFT: { status: 409, say: () => 'This protocol version is published and never changes.' },
	NOT_PUBLISHED: { status: 409, say: () => 'The study has no published protocol version yet.' },
	DEFINITION: { status: 422, say: (f) => `The study definition needs another look: ${f.why}` },
	DEFINITION_FILE: {
		status: 422,
		say: (f) => `This file was not taken, and nothing was made. ${f.why}`
	},
	SITE_NOT_APPROVED: {
		status: 422,
		say: (f) =>
			`${f.site} was not approved on that day: nobody is enrolled at a site before its approval is recorded.`
	},
	CONSENT_NEEDED: {
		status: 422,
		say: (f) => `A valid consent on or before this day is needed first. ${f.why ?? ''}`.trim()
	},
	CONSENT_EARLY: {
		status: 422,
		say: (f) => `The consent version was approved on ${f.approved}; a consent cannot be earlier.`
	},
	SIGNING_SECRET: {
		status: 422,
		say: () => 'That is not how you sign in here. Nothing was signed.'
	},
	SIGNING_PASSWORD: {
		status: 409,
		say: () =>
			'Signing needs a password of your own here, besides your organisation’s account. Sign out, choose “Password forgotten?” on the sign-in page, and set one by the link you receive.'
	},
	SHOWN_CHANGED: {
		status: 409,
		say: (f) =>
			`${f.title ?? 'A record'} changed after it was shown to you. Nothing was signed: look at it again as it stands now.`
	},
	NOT_SIGNABLE: { status: 422, say: (f) => `${f.title} cannot be signed now. ${f.why}` },
	SIGNED_ALREADY: {
		status: 409,
		say: (f) => `${f.title} is signed already, and the signature stands. Nothing was signed again.`
	},
	SIGNATURE_NEEDED: {
		status: 422,
		say: () => 'The investigator’s standing signature of the eligibility checklist is needed first.'
	},
	NOT_ELIGIBLE: { status: 422, say: (f) => `Not every criterion is met: ${f.which}` },
	ALREADY_ENTERED: { status: 409, say: () => 'This person was entered already.' },
	ALREADY_RANDOMISED: {
		status: 409,
		say: () => 'This subject was randomised already; the kit stays the same.'
	},
	ALLOCATION_UNAVAILABLE: {
		status: 409,
		say: () =>
			'No allocation can be given at the moment. Nothing was changed. Tell the study office.'
	},
	LIST_EXISTS: {
		status: 409,
		say: () => 'The allocation list was made already and is never made again.'
	},
	KITS_BEGUN: {
		status: 409,
		say: () =>
			'Subjects were randomised already: stock is managed from the first kit or not at all.'
	},
	KIT_LEVEL_NEEDED: { status: 409, say: () => 'Say first how many kits this site holds.' },
	KIT_LIST_NEEDED: {
		status: 409,
		say: () => 'There is no allocation list yet, so there are no kits to send.'
	},
	KITS_FULL: {
		status: 409,
		say: () => 'This site has its full stock already, or it is on the way.'
	},
	KITS_USED_UP: {
		status: 409,
		say: () => 'There are not enough kits left to fill this site’s stock. Nothing was sent.'
	},
	NOTHING_MASKED: {
		status: 409,
		say: () => 'There is no masked allocation of this subject to show.'
	},
	UNMASK_SECRET: {
		status: 422,
		say: () => 'That is not how you sign in here. Nothing was shown.'
	},
	CODE_UNKNOWN: {
		status: 422,
		say: () =>
			'This code does not belong to this subject’s kit. Read it again from the opened sheet.'
	},
	CODE_USED: { status: 409, say: () => 'This code was entered already. Each is taken once.' },
	FUTURE: { status: 422, say: (f) => `${f.what ?? 'This date'} lies in the future.` },
	OUTSIDE_WINDOW: {
		status: 422,
		say: (f) =>
			`${f.day} is outside the window ${f.earliest} to ${f.latest}. Say why to book it all the same.`
	},
	ROOM_TAKEN: { status: 409, say: () => 'That room is taken at this time.' },
	STAFF_TAKEN: { status: 409, say: () => 'That person has another visit at this time.' },
	SUBJECT_TAKEN: { status: 409, say: () => 'The subject has another visit at this time.' },
	OUTSIDE_HOURS: { status: 422, say: (f) => `The site is not open then. It is open ${f.open}.` },
	VISIT_STATE: { status: 409, say: (f) => `This visit is ${f.status}: that cannot be done now.` },
	NOT_PASSED: {
		status: 409,
		say: (f) => `The window is open until ${f.latest}: the visit is not missed yet.`
	},
	INCOMPLETE: {
		status: 422,
		say: (f) => `Each measure needs a value or a reason. Still open: ${f.which}`
	},
	HARD_LIMIT: { status: 422, say: (f) => String(f.why) },
	SOFT_LIMIT: { status: 422, say: (f) => String(f.why) },
	LEFT_STUDY: { status: 409, say: () => 'The subject’s visits have ended.' },
	MAPPING: { status: 422, say: (f) => String(f.why) },
	MASKED_ALLOCATION: {
		status: 422,
		say: () =>
			'This study is masked: an allocation column is not taken here. The independent statistician loads it.'
	},
	EMPTY_CUT: {
		status: 422,
		say: () => 'There is no measurement before this instant: nothing to freeze.'
	},
	PLAN_EXISTS: { status: 409, say: () => 'The plan is signed and does not change.' },
	LOOK_NOT_READY: { status: 409, say: () => 'The look has no result yet.' },
	REPORT_NOT_READY: { status: 409, say: () => 'The report is not ready yet.' },
	NOT_RELEASED: { status: 403, say: () => 'This report has not been released to you.' },
	NOT_ANALYSABLE: { status: 422, say: (f) => String(f.why) },
	JOB_OVER: { status: 409, say: () => 'The job is over already.' }
} satisfies Record<string, Entry>;

export type RefusalCode = keyof typeof refusals;

/** Field path to sentence: what a form shows beside the field, and the API under "errors". */
export type FieldErrors = Record<string, string>;

export class Refusal extends Error {
	constructor(
		readonly code: RefusalCode,
		readonly facts: Facts = {},
		readonly fields: FieldErrors = {}
	) {
		super((refusals[code] as Entry).say(facts));
		this.name = 'Refusal';
	}
	get status(): number {
		return refusals[this.code].status;
	}
}
