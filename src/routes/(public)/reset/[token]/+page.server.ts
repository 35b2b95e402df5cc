import { choosePassword, loadLink } from '$lib/server/link-pages';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = (event) => loadLink(event, 'reset');
export const actions: Actions = { default: (event) => choosePassword(event, 'reset') };
