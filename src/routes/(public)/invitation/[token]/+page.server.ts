import { choosePassword, loadLink } from '$lib/server/link-pages';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = (event) => loadLink(event, 'invitation');
export const actions: Actions = { default: (event) => choosePassword(event, 'invitation') };
