import type { ColumnType, Generated } from 'kysely';
import type { Role } from '$lib/domain/person/roles';
import type { VisitStatus } from '$lib/domain/visit/status';

/**
 * The columns as the database holds them. Dates are 'YYYY-MM-DD' text, instants are Dates, numeric columns come back as
 * numbers (db.ts sets the parsers). A test compares this file with a freshly migrated database.
 */
type Timestamp = Date;
/** bigint comes back as text: it may not fit a number. */
type Big = string;
type Numeric = number;
/** Written as text (JSON.stringify), read back parsed; whoever reads it parses it with the schema of its concept. */
type Json = ColumnType<unknown, string, string>;
type GeneratedJson = ColumnType<unknown, string | undefined, string>;
export type JobStatus = 'waiting' | 'running' | 'done' | 'failed' | 'cancelled';
export type MailStatus =
	'waiting' | 'sending' | 'sent' | 'failed' | 'doubtful' | 'no address' | 'stopped';
export type MailKind =
	| 'invitation'
	| 'reset'
	| 'visit-invitation'
	| 'visit-moved'
	| 'visit-cancelled'
	| 'report-released'
	| 'unmasking'
	| 'kits-low';

interface AllocationRecordTable {
	id: string;
	study_id: string;
	method: string;
	hash: string;
	count: number;
	asked_by: string;
	made_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface AppointmentTable {
	id: string;
	study_id: string;
	site_id: string;
	subject_id: string;
	visit_id: string;
	room_id: string;
	staff_id: string;
	starts_at: Timestamp;
	ends_at: Timestamp;
	zone: string;
	status: Generated<'booked' | 'kept' | 'cancelled'>;
	outside_reason: string | null;
	calendar_uid: string;
	calendar_sequence: Generated<number>;
	changed_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface CodePrintTable {
	id: string;
	study_id: string;
	site_id: string;
	asked_by: string;
	asked_at: Generated<Timestamp>;
	status: Generated<'waiting' | 'made' | 'failed'>;
	kits: number | null;
	job_run_id: string | null;
	version: Generated<number>;
}

interface ConsentTable {
	id: string;
	study_id: string;
	site_id: string;
	screening_id: string | null;
	subject_id: string | null;
	consent_version_id: string;
	signed_at: Timestamp;
	signed_by: string;
	explained_by: string;
	copy_given: boolean;
	obtained_at: Timestamp | null;
	relationship: string | null;
	witnessed: Generated<boolean>;
	minor: Generated<boolean>;
	assent: string | null;
	assent_reason: string | null;
	withdrawn_on: string | null;
	withdrawn_reason: string | null;
	version: Generated<number>;
}

interface ConsentVersionTable {
	id: string;
	study_id: string;
	label: string;
	language: Generated<string>;
	approved_on: string;
	version: Generated<number>;
}

interface ContactAttemptTable {
	id: string;
	study_id: string;
	site_id: string;
	subject_id: string;
	visit_id: string | null;
	at: Timestamp;
	way: string;
	outcome: string;
	next_step: string | null;
	try_again_on: string | null;
	by: string;
	version: Generated<number>;
}

interface ContactDetailsTable {
	subject_id: string;
	study_id: string;
	site_id: string;
	name: string;
	email: string | null;
	phone: string | null;
	language: Generated<string>;
	version: Generated<number>;
}

interface CutTable {
	id: string;
	study_id: string;
	number: number;
	label: string;
	cut_off_at: Timestamp;
	extracted_at: Timestamp;
	made_by: string;
	subjects: number;
	measurements: number;
	fingerprint: string;
	content: string;
}

interface DeviationTable {
	id: string;
	study_id: string;
	site_id: string;
	subject_id: string;
	visit_id: string | null;
	category: string;
	important: Generated<boolean>;
	detail: string;
	found_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface DownloadTable {
	id: string;
	study_id: string;
	report_id: string;
	person_id: string;
	at: Generated<Timestamp>;
	sha256: string | null;
}

interface FeedTable {
	id: string;
	person_id: string;
	study_id: string;
	site_id: string | null;
	token_hash: Buffer;
	created_at: Generated<Timestamp>;
	revoked_at: Timestamp | null;
	version: Generated<number>;
}

interface ImportBatchTable {
	id: string;
	study_id: string;
	file_name: string;
	storage_key: string;
	sha256: string;
	bytes: number;
	headers: Json;
	mapping: Json | null;
	status: Generated<'uploaded' | 'checking' | 'checked' | 'importing' | 'imported' | 'failed'>;
	summary: Json | null;
	job_run_id: string | null;
	uploaded_by: string;
	created_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface InstallationTable {
	only_one: Generated<boolean>;
	clock_may_move: Generated<boolean>;
	training: Generated<boolean>;
	set_up_at: Timestamp | null;
}

interface JobRunTable {
	id: string;
	queue: string;
	title: string;
	study_id: string | null;
	status: Generated<JobStatus>;
	fraction: Generated<number>;
	message: Generated<string>;
	attempts: Generated<number>;
	cancel_asked: Generated<boolean>;
	requested_by: string;
	created_at: Generated<Timestamp>;
	started_at: Timestamp | null;
	finished_at: Timestamp | null;
	error: string | null;
	result: Json | null;
	version: Generated<number>;
}

interface KitTable {
	study_id: string;
	kit_number: string;
	site_id: string;
	delivery_id: string;
	expires_on: string;
	status: Generated<'on the way' | 'in stock' | 'given' | 'damaged' | 'lost'>;
	note: string | null;
	subject_id: string | null;
	version: Generated<number>;
}

interface KitDeliveryTable {
	id: string;
	study_id: string;
	site_id: string;
	number: number;
	kits: number;
	expires_on: string;
	sent_by: string;
	sent_at: Generated<Timestamp>;
	received_by: string | null;
	received_at: Timestamp | null;
	version: Generated<number>;
}

interface KitLevelTable {
	site_id: string;
	study_id: string;
	full_stock: number;
	resupply_at: number;
	told_at: Timestamp | null;
	version: Generated<number>;
}

interface KitPlanTable {
	study_id: string;
	use_days: number;
	version: Generated<number>;
}

interface LinkTable {
	id: string;
	person_id: string | null;
	purpose: 'invitation' | 'reset' | 'set-up';
	token_hash: Buffer;
	created_at: Generated<Timestamp>;
	expires_at: Timestamp;
	used_at: Timestamp | null;
	version: Generated<number>;
}

interface LookTable {
	id: string;
	study_id: string;
	cut_id: string;
	number: number;
	kind: 'pooled' | 'by arm';
	planned: Generated<boolean>;
	status: Generated<JobStatus>;
	spec: Json | null;
	result: Json | null;
	input_hash: string | null;
	engine_version: string | null;
	error: string | null;
	job_run_id: string | null;
	requested_by: string;
	requested_at: Generated<Timestamp>;
	finished_at: Timestamp | null;
	version: Generated<number>;
}

interface MailTable {
	id: string;
	kind: MailKind;
	study_id: string | null;
	site_id: string | null;
	person_id: string | null;
	subject_id: string | null;
	appointment_id: string | null;
	facts: GeneratedJson;
	secret: Buffer | null;
	status: Generated<MailStatus>;
	message_id: string;
	created_at: Generated<Timestamp>;
	sent_at: Timestamp | null;
	attempts: Generated<number>;
	error: string | null;
	version: Generated<number>;
}

interface MeasureTable {
	id: string;
	study_id: string;
	protocol_version_id: string;
	key: string;
	name: string;
	unit: Generated<string>;
	decimals: Generated<number>;
	kind: 'number' | 'choice' | 'date' | 'text' | 'repeated' | 'derived';
	position: number;
	spec: Json;
	open_to: 'pharmacist' | 'nurse' | 'investigator' | null;
}

interface MeasurementTable {
	id: string;
	study_id: string;
	site_id: string;
	subject_id: string;
	visit_id: string;
	measure_id: string;
	value: Numeric | null;
	text_value: string | null;
	readings: Numeric[] | null;
	unit: string;
	entered_value: Numeric | null;
	entered_unit: string | null;
	entered_readings: Numeric[] | null;
	not_done_reason: string | null;
	soft_answer: string | null;
	comment: string | null;
	taken_at: Timestamp | null;
	entered_at: Generated<Timestamp>;
	taken_by: string;
	source: 'form' | 'import' | 'derived';
	version: Generated<number>;
	open_to: Generated<'pharmacist' | 'nurse' | 'investigator' | null>;
}

interface MonitoringPlanTable {
	id: string;
	study_id: string;
	spec: Json;
	signed_by: string;
	signed_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface PersonTable {
	id: string;
	kind: Generated<'person' | 'system'>;
	email: string;
	name: string;
	password_hash: string | null;
	language: Generated<string>;
	active: Generated<boolean>;
	created_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface PersonRoleTable {
	id: string;
	person_id: string;
	role: Role;
	study_id: string | null;
	site_id: string | null;
	valid_from: string;
	valid_to: string | null;
	granted_by: string;
	granted_at: Generated<Timestamp>;
	confirmed_by: string | null;
	confirmed_at: Timestamp | null;
	ended_at: Timestamp | null;
	version: Generated<number>;
}

interface PlannedMeasureTable {
	planned_visit_id: string;
	measure_id: string;
	study_id: string;
}

interface PlannedVisitTable {
	id: string;
	study_id: string;
	protocol_version_id: string;
	key: string;
	name: string;
	position: number;
	spec: Json;
	length_minutes: number;
}

interface ProtocolVersionTable {
	id: string;
	study_id: string;
	number: number;
	definition: Json;
	status: Generated<'draft' | 'published'>;
	published_at: Timestamp | null;
	published_by: string | null;
	summary: string | null;
	approved_on: string | null;
	reconsent: boolean | null;
	reconsent_by: string | null;
	version: Generated<number>;
}

interface RateLimitTable {
	key: string;
	points: Generated<number>;
	expire: Big | null;
}

interface RecommendationTable {
	id: string;
	study_id: string;
	report_id: string;
	advice: string;
	reason: string;
	meeting_on: string;
	attendees: string;
	recorded_by: string;
	recorded_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface ReleaseTable {
	id: string;
	study_id: string;
	report_id: string;
	person_id: string;
	status: Generated<'asked' | 'approved' | 'ready' | 'failed'>;
	asked_by: string;
	asked_at: Generated<Timestamp>;
	approved_by: string | null;
	approved_at: Timestamp | null;
	storage_key: string | null;
	sha256: string | null;
	version: Generated<number>;
}

interface ReportTable {
	id: string;
	study_id: string;
	look_id: string;
	kind: 'open' | 'closed';
	status: Generated<'waiting' | 'made' | 'failed'>;
	storage_key: string | null;
	sha256: string | null;
	pages: number | null;
	error: string | null;
	job_run_id: string | null;
	made_by: string;
	made_at: Timestamp | null;
	version: Generated<number>;
}

interface RoomTable {
	id: string;
	study_id: string;
	site_id: string;
	name: string;
	version: Generated<number>;
}

interface ScreeningTable {
	id: string;
	study_id: string;
	site_id: string;
	number: number;
	screened_on: string;
	outcome: Generated<'in progress' | 'entered' | 'not entered'>;
	reason: string | null;
	eligibility: GeneratedJson;
	subject_id: string | null;
	version: Generated<number>;
}

interface SessionTable {
	id: string;
	person_id: string;
	method: 'password' | 'sso';
	started_at: Generated<Timestamp>;
	seen_at: Generated<Timestamp>;
	locked_at: Timestamp | null;
	ended_at: Timestamp | null;
	signing_since: Timestamp | null;
	device: Generated<string>;
	version: Generated<number>;
}

interface SignatureTable {
	id: string;
	study_id: string;
	site_id: string | null;
	record: string;
	record_id: string;
	meaning: 'eligibility' | 'responsibility' | 'review' | 'approval';
	statement: string;
	form_version: number;
	content: string;
	sha256: string;
	signer_id: string;
	session_id: string;
	/** From here on the database fills in what stands, whatever is given. */
	printed_name: Generated<string>;
	role: Generated<string>;
	at: Generated<Timestamp>;
	zone: Generated<string>;
	digest: Generated<Buffer>;
}

interface SiteTable {
	id: string;
	study_id: string;
	code: string;
	name: string;
	zone: string;
	opening: GeneratedJson;
	version: Generated<number>;
	approved_on: string | null;
	closures: GeneratedJson;
}

interface StudyTable {
	id: string;
	code: string;
	name: string;
	masked: boolean;
	training: Generated<boolean>;
	status: Generated<'draft' | 'open' | 'ended'>;
	created_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface StudyExitTable {
	id: string;
	study_id: string;
	site_id: string;
	subject_id: string;
	kind: string;
	happened_on: string;
	reason: string | null;
	taken_back_at: Timestamp | null;
	taken_back_by: string | null;
	taken_back_reason: string | null;
	version: Generated<number>;
}

interface SubjectTable {
	id: string;
	study_id: string;
	site_id: string;
	protocol_version_id: string;
	number: string;
	imported_as: string | null;
	enrolled_on: string;
	randomised_at: Timestamp | null;
	randomised_on: string | null;
	kit_number: string | null;
	stratum: GeneratedJson;
	characteristics: GeneratedJson;
	version_since: string | null;
	version: Generated<number>;
	/** Filled in by the allocation where nothing is masked; elsewhere always null. */
	arm_key: string | null;
}

interface ReconsentRefusalTable {
	id: string;
	study_id: string;
	site_id: string;
	subject_id: string;
	protocol_version_id: string | null;
	refused_on: string;
	reason: string | null;
	recorded_by: string;
	recorded_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface TransferTable {
	id: string;
	study_id: string;
	site_id: string;
	from_site_id: string;
	subject_id: string;
	transferred_on: string;
	reason: string;
	made_by: string;
	made_at: Generated<Timestamp>;
	version: Generated<number>;
}

interface UploadTable {
	id: string;
	study_id: string;
	site_id: string;
	subject_id: string | null;
	consent_id: string;
	kind: 'pdf' | 'png' | 'jpeg';
	bytes: number;
	sha256: string;
	storage_key: string;
	uploaded_by: string;
	uploaded_at: Generated<Timestamp>;
	superseded_at: Timestamp | null;
	superseded_reason: string | null;
	version: Generated<number>;
}

interface UnmaskingTable {
	id: string;
	study_id: string;
	site_id: string;
	subject_id: string;
	kind: 'emergency' | 'sealed code' | 'accidental';
	person_id: string;
	known_to: string;
	happened_at: Timestamp;
	recorded_at: Generated<Timestamp>;
	reason: string;
	impact: string | null;
}

interface VisitTable {
	id: string;
	study_id: string;
	site_id: string;
	subject_id: string;
	planned_visit_id: string | null;
	name: string;
	position: number;
	earliest: string | null;
	target: string | null;
	latest: string | null;
	status: Generated<VisitStatus>;
	happened_on: string | null;
	study_time: Numeric | null;
	finished_at: Timestamp | null;
	finished_by: string | null;
	missed_reason: string | null;
	ended_by: string | null;
	dropped_by: string | null;
	version: Generated<number>;
}

interface AuditEventTable {
	id: Generated<Big>;
	at: Timestamp;
	wall_at: Generated<Timestamp>;
	xid: Generated<string>;
	actor: string;
	role: string;
	request_id: string;
	action: 'create' | 'change' | 'remove' | 'act' | 'refused';
	record: string;
	record_id: string | null;
	study_id: string | null;
	site_id: string | null;
	subject_id: string | null;
	personal: Generated<boolean>;
	before: Json | null;
	after: Json | null;
	reason: string | null;
	digest: Buffer;
}

interface AuditSealTable {
	number: Generated<Big>;
	at: Generated<Timestamp>;
	events: Big;
	digest: Buffer;
	previous: Buffer | null;
}

interface AuditSealedTable {
	event_id: Big;
	seal: Big;
}

interface ClosedAllocationListTable {
	id: string;
	study_id: string;
	seed: string;
	block_sizes: number[];
	method: string;
	hash: string;
	made_at: Generated<Timestamp>;
	plan: GeneratedJson;
}

interface ClosedArmLetterTable {
	study_id: string;
	arm_key: string;
	letter: string;
}

interface ClosedChanceTable {
	list_id: string;
	study_id: string;
	position: number;
	coin: Big;
	draw: Big;
	subject_id: string | null;
	used_at: Timestamp | null;
	levels: Json | null;
	arm_key: string | null;
}

interface ClosedClosedReportTable {
	report_id: string;
	study_id: string;
	storage_key: string;
	file_key: Buffer;
	sha256: string;
}

interface ClosedCodeSheetTable {
	print_id: string;
	study_id: string;
	storage_key: string;
	file_key: Buffer;
	sha256: string;
}

interface ClosedCutAllocationTable {
	cut_id: string;
	study_id: string;
	content: Json;
	hash: string;
}

interface ClosedEventTable {
	event_id: Big;
	before: Json | null;
	after: Json | null;
}

interface ClosedListPositionTable {
	id: string;
	study_id: string;
	list_id: string;
	stratum: Json;
	position: number;
	arm_key: string;
	kit_number: string;
	subject_id: string | null;
	used_at: Timestamp | null;
}

interface ClosedLookRequestTable {
	look_id: string;
	study_id: string;
	spec: Json;
}

interface ClosedLookResultTable {
	look_id: string;
	study_id: string;
	result: Json;
	input_hash: string;
	made_at: Generated<Timestamp>;
}

interface ClosedMinimisationTable {
	list_id: string;
	study_id: string;
	arms: Json;
	best_chance: Numeric;
	random_below: Big;
}

interface ClosedMinimisationChoiceTable {
	study_id: string;
	best_chance: Numeric;
	chosen_by: string;
	chosen_at: Generated<Timestamp>;
}

interface ClosedReleasedCopyTable {
	release_id: string;
	study_id: string;
	person_id: string;
	storage_key: string;
	file_key: Buffer;
	sha256: string;
}

interface ClosedSealedCodeTable {
	id: string;
	study_id: string;
	print_id: string;
	kit_number: string;
	code_hash: string;
	used_at: Timestamp | null;
	unmasking_id: string | null;
}

interface ClosedShownArmTable {
	unmasking_id: string;
	study_id: string;
	subject_id: string;
	arm_key: string;
}

export interface Tables {
	allocation_record: AllocationRecordTable;
	appointment: AppointmentTable;
	code_print: CodePrintTable;
	consent: ConsentTable;
	consent_version: ConsentVersionTable;
	contact_attempt: ContactAttemptTable;
	contact_details: ContactDetailsTable;
	cut: CutTable;
	deviation: DeviationTable;
	download: DownloadTable;
	feed: FeedTable;
	import_batch: ImportBatchTable;
	installation: InstallationTable;
	job_run: JobRunTable;
	kit: KitTable;
	kit_delivery: KitDeliveryTable;
	kit_level: KitLevelTable;
	kit_plan: KitPlanTable;
	link: LinkTable;
	look: LookTable;
	mail: MailTable;
	measure: MeasureTable;
	measurement: MeasurementTable;
	monitoring_plan: MonitoringPlanTable;
	person: PersonTable;
	person_role: PersonRoleTable;
	planned_measure: PlannedMeasureTable;
	planned_visit: PlannedVisitTable;
	protocol_version: ProtocolVersionTable;
	rate_limit: RateLimitTable;
	recommendation: RecommendationTable;
	release: ReleaseTable;
	report: ReportTable;
	room: RoomTable;
	screening: ScreeningTable;
	session: SessionTable;
	signature: SignatureTable;
	site: SiteTable;
	study: StudyTable;
	study_exit: StudyExitTable;
	subject: SubjectTable;
	unmasking: UnmaskingTable;
	visit: VisitTable;
	reconsent_refusal: ReconsentRefusalTable;
	transfer: TransferTable;
	upload: UploadTable;
	'audit.event': AuditEventTable;
	'audit.seal': AuditSealTable;
	'audit.sealed': AuditSealedTable;
	'closed.allocation_list': ClosedAllocationListTable;
	'closed.arm_letter': ClosedArmLetterTable;
	'closed.chance': ClosedChanceTable;
	'closed.closed_report': ClosedClosedReportTable;
	'closed.code_sheet': ClosedCodeSheetTable;
	'closed.cut_allocation': ClosedCutAllocationTable;
	'closed.event': ClosedEventTable;
	'closed.list_position': ClosedListPositionTable;
	'closed.look_request': ClosedLookRequestTable;
	'closed.look_result': ClosedLookResultTable;
	'closed.minimisation': ClosedMinimisationTable;
	'closed.minimisation_choice': ClosedMinimisationChoiceTable;
	'closed.released_copy': ClosedReleasedCopyTable;
	'closed.sealed_code': ClosedSealedCodeTable;
	'closed.shown_arm': ClosedShownArmTable;
}
