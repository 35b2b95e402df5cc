import type { Selectable } from 'kysely';
import type { Reader } from '../change';
import type { MailKind, Tables } from '../db/tables';
import { invitationContent, resetContent } from './account-content';
import { noticeContent, releasedContent } from './released-content';
import { visitContent } from './visit-content';

export type MailRow = Selectable<Tables['mail']>;

/** What leaves the house. */
export interface MailContent {
	to: string;
	subject: string;
	text: string;
	html?: string;
	/** One mail, one method (RFC 5546): the file a calendar program follows. */
	icalEvent?: { method: 'REQUEST' | 'CANCEL'; filename: string; content: string };
}

/** Made at sending, from the rows as they then are; null: there is no address to send it to. */
export type ContentMaker = (mail: MailRow, reader: Reader) => Promise<MailContent | null>;

/** Each area adds the mails it sends. A kind that is not here cannot be sent, and the sender says so. */
export const mailContent: Partial<Record<MailKind, ContentMaker>> = {
	invitation: invitationContent,
	reset: resetContent,
	'report-released': releasedContent,
	unmasking: noticeContent('unmasking'),
	'kits-low': noticeContent('kits-low'),
	...visitContent
};
