import { linkHours } from '$lib/domain/person/link-hours';
import { addHours, instantText } from '$lib/time/zones';
import { unwrap } from '../secret';
import type { ContentMaker } from './content';
import { renderMail } from './render';

/** To the account itself; somebody switched off meanwhile gets no more mail. */
const toPerson =
	(
		template: 'account-invitation' | 'password-reset',
		purpose: keyof typeof linkHours
	): ContentMaker =>
	async (mail, reader) => {
		const person = await reader
			.selectFrom('person')
			.select(['email'])
			.where('id', '=', mail.person_id)
			.where('active', '=', true)
			.executeTakeFirst();
		if (!person || !mail.secret) return null;
		return {
			to: person.email,
			...renderMail(template, {
				link: unwrap(mail.secret),
				expires: instantText(addHours(mail.created_at, linkHours[purpose]), 'UTC')
			})
		};
	};

export const invitationContent = toPerson('account-invitation', 'invitation');
export const resetContent = toPerson('password-reset', 'reset');
