import { SvelteKitAuth } from '@auth/sveltekit';
import Credentials from '@auth/sveltekit/providers/credentials';
import { CredentialsSignin } from '@auth/sveltekit';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import { config } from '../config';
import { log } from '../log';
import { personForPassword, personForSso, sessionHours, startSession } from './session';

/** A sign-in refused for too many tries says so; every other refusal looks alike. */
export class Throttled extends CredentialsSignin {
	code = 'throttled';
}

/** Where somebody goes whom the provider knows and Heddle does not. */
const turnedAway = '/sign-in?error=AccessDenied';

const text = (value: unknown) => (typeof value === 'string' ? value : '');

/**
 * Sign-in by password or by the organisation's identity provider. The cookie holds a signed token with the id of a
 * session row; the row is read at each request, so ending it takes effect at once and for that session alone.
 */
export const {
	handle: authHandle,
	signIn,
	signOut
} = SvelteKitAuth(async () => {
	const { oidc, authSecret } = config();
	return {
		secret: authSecret,
		trustHost: true,
		session: { strategy: 'jwt', maxAge: sessionHours * 3600 },
		pages: { signIn: '/sign-in', error: '/sign-in' },
		logger: {
			error: (error) => {
				if (!(error instanceof CredentialsSignin)) log.error({ err: error }, 'sign-in');
			},
			warn: () => {},
			debug: () => {}
		},
		providers: [
			Credentials({
				credentials: { email: {}, password: {} },
				async authorize(given, request) {
					const requestId = newId();
					const password = text(given.password);
					if (password.length > 256) return null;
					try {
						const person = await personForPassword(
							text(given.email).slice(0, 254),
							password,
							requestId
						);
						if (!person) return null;
						const device = request.headers.get('user-agent') ?? '';
						const sid = await startSession(person, 'password', device, requestId);
						return { id: person.id, name: person.name, email: person.email, sid };
					} catch (error) {
						if (error instanceof Refusal && error.code === 'THROTTLED') throw new Throttled();
						throw error;
					}
				}
			}),
			...(oidc
				? [
						{
							id: 'sso',
							name: 'Organisation account',
							type: 'oidc' as const,
							issuer: oidc.issuer,
							clientId: oidc.clientId,
							clientSecret: oidc.clientSecret,
							checks: ['pkce', 'state', 'nonce'] as ('pkce' | 'state' | 'nonce')[]
						}
					]
				: [])
		],
		callbacks: {
			async signIn({ account, profile }) {
				if (account?.provider !== 'sso') return true;
				// Only an address that the provider has verified may stand for an account here.
				if (profile?.email_verified === false || !profile?.email) return turnedAway;
				return (await personForSso(profile.email)) ? true : turnedAway;
			},
			async jwt({ token, user, account, profile }) {
				if (account?.provider === 'sso' && profile?.email) {
					const person = await personForSso(profile.email);
					if (!person) return null;
					token.sid = await startSession(person, 'sso', '', newId());
				} else if (user && 'sid' in user) token.sid = user.sid;
				return token;
			},
			session({ session, token }) {
				return { ...session, sid: token.sid as string | undefined };
			}
		}
	};
});

declare module '@auth/core/types' {
	interface Session {
		sid?: string;
	}
}
