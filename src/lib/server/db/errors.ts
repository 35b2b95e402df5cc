import { Refusal, refusals, type RefusalCode } from '$lib/refusal';

interface DatabaseError {
	code?: string;
	constraint?: string;
	message?: string;
	detail?: string;
	column?: string;
}

const byConstraint: Record<string, RefusalCode> = {
	room_taken: 'ROOM_TAKEN',
	staff_taken: 'STAFF_TAKEN',
	subject_taken: 'SUBJECT_TAKEN',
	person_email: 'EMAIL_TAKEN',
	study_code: 'CODE_TAKEN',
	allocation_record_study_id_key: 'LIST_EXISTS',
	allocation_list_study_id_key: 'LIST_EXISTS',
	monitoring_plan_study_id_key: 'PLAN_EXISTS'
};

/** What the database refused, as a refusal a person can read; anything it did not refuse by rule comes back unchanged. */
export function translated(error: unknown): unknown {
	if (error instanceof Refusal) return error;
	const { code, constraint, message } = (error ?? {}) as DatabaseError;
	if (constraint && byConstraint[constraint]) return new Refusal(byConstraint[constraint]);
	if (code?.startsWith('HD') && message && message in refusals)
		return new Refusal(message as RefusalCode);
	switch (code) {
		case '23505':
			return new Refusal('CONFLICT', { what: 'The same thing is there already.' });
		case '23P01':
			return new Refusal('CONFLICT');
		case '23503':
			return new Refusal('NOT_FOUND');
		case '23514':
		case '22021':
		case '22P05':
		case '22003':
		case '22008':
		case '22P02':
			return new Refusal('INVALID');
		case '40001':
		case '40P01':
			return new Refusal('STALE');
		case '42501':
			return new Refusal('NOT_FOUND');
		default:
			return error;
	}
}
