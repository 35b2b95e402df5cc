import type { Writer } from '../change';
import { queueMail } from '../mail/queue-mail';

/** Tells a board member that something is there for them: neither the study nor what was found stands in the mail. */
export async function tellReleased(
	writer: Writer,
	studyId: string,
	personId: string
): Promise<void> {
	await queueMail(writer, { kind: 'report-released', personId, studyId });
}
