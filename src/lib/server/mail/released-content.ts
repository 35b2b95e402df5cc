import { instantText } from '$lib/time/zones';
import { config } from '../config';
import type { ContentMaker } from './content';
import { renderMail } from './render';

/** That something is there, and where to sign in: neither the study nor what it is about. */
export const releasedContent: ContentMaker = async (mail, reader) => {
	const person = await reader
		.selectFrom('person')
		.select('email')
		.where('id', '=', mail.person_id)
		.where('active', '=', true)
		.executeTakeFirst();
	if (!person) return null;
	return {
		to: person.email,
		...renderMail('report-released', {
			link: `${config().origin}/`,
			since: instantText(mail.created_at, 'UTC')
		})
	};
};
