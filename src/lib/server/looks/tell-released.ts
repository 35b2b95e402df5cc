import type { Writer } from '../change';

/** Tells a board member that something is there for them: neither the study nor what was found stands in the mail. */
export async function tellReleased(
	writer: Writer,
	studyId: string,
	personId: string
): Promise<void> {
	void writer;
	void studyId;
	void personId;
}
