import { eligibilityKind } from '../subject/eligibility-signable.server';
import type { SignableKind } from './signable';
import type { RecordKind } from './signature';

/** Every kind of record that can be signed. */
export const signableKinds: Record<RecordKind, SignableKind> = { eligibility: eligibilityKind };

/** The kind by its name; undefined for a name that a kept signature holds and nobody knows any more. */
export const findKind = (name: string): SignableKind | undefined =>
	(signableKinds as Record<string, SignableKind | undefined>)[name];
