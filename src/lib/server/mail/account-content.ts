import { z } from 'zod';
import { unwrap } from '../secret';
import type { ContentMaker } from './content';
import { renderMail } from './render';

const facts = z.object({ expires: z.string() });

/** To the account itself; somebody switched off meanwhile gets no more mail. */
const toPerson =
	(name: 'account-invitation' | 'password-reset'): ContentMaker =>
	async (mail, reader) => {
		const person = await reader
			.selectFrom('person')
			.select('email')
			.where('id', '=', mail.person_id)
			.where('active', '=', true)
			.executeTakeFirst();
		if (!person || !mail.secret) return null;
		const { expires } = facts.parse(mail.facts);
		return { to: person.email, ...renderMail(name, { link: unwrap(mail.secret), expires }) };
	};

export const invitationContent = toPerson('account-invitation');
export const resetContent = toPerson('password-reset');
