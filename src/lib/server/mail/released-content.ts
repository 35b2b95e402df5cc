import { instantText } from '$lib/time/zones';
import { config } from '../config';
import type { ContentMaker } from './content';
import { renderMail } from './render';

/** A mail to an account that something is there, and where to sign in: neither the study nor what it is about. */
export const noticeContent =
	(name: 'report-released' | 'unmasking' | 'kits-low'): ContentMaker =>
	async (mail, reader) => {
		const person = await reader
			.selectFrom('person')
			.select('email')
			.where('id', '=', mail.person_id)
			.where('active', '=', true)
			.executeTakeFirst();
		if (!person) return null;
		return {
			to: person.email,
			...renderMail(name, {
				link: `${config().origin}/`,
				since: instantText(mail.created_at, 'UTC')
			})
		};
	};

export const releasedContent = noticeContent('report-released');
