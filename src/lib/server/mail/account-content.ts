import { unwrap } from '../secret';
import type { ContentMaker } from './content';
import { renderMail } from './account-render';

/** To the account itself; somebody switched off meanwhile gets no more mail. */
const toPerson =
	(template: 'invitation' | 'reset'): ContentMaker =>
	async (mail, reader) => {
		const person = await reader
			.selectFrom('person')
			.select(['name', 'email'])
			.where('id', '=', mail.person_id)
			.where('active', '=', true)
			.executeTakeFirst();
		if (!person || !mail.secret) return null;
		return {
			to: person.email,
			...renderMail(template, { name: person.name, link: unwrap(mail.secret) })
		};
	};

export const invitationContent = toPerson('invitation');
export const resetContent = toPerson('reset');
