import type { Actor } from '$lib/server/actor';

declare global {
	namespace App {
		interface Error {
			message: string;
			code?: string;
			errorId?: string;
		}
		interface Locals {
			requestId: string;
			/** Set when somebody is signed in and the screen is not locked. */
			actor: Actor | null;
			session: { id: string; locked: boolean; personId: string; name: string; endsAt: Date } | null;
			/** The actor behind a locked screen: only unlocking and signing out may use it. */
			lockedActor: Actor | null;
		}
		interface PageData {
			title?: string;
		}
	}
}

export {};
