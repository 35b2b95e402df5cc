import type { Handle, HandleServerError, ServerInit } from '@sveltejs/kit';
import { AuthError } from '@auth/core/errors';
import { sequence } from '@sveltejs/kit/hooks';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import { authHandle } from '$lib/server/auth/auth';
import { findSession, noteSeen } from '$lib/server/auth/session';
import { countTry } from '$lib/server/auth/throttle';
import { recordRefusal } from '$lib/server/change';
import { config } from '$lib/server/config';
import { database } from '$lib/server/db/db';
import { log } from '$lib/server/log';
import { accessOf, mayEnter } from '$lib/server/routes';
import { sendTo, turnAway } from '$lib/server/turn-away';
import { clock } from '$lib/time/clock';

/** A wrong environment stops the start with its own sentence; requests in hand end before the database is let go. */
export const init: ServerInit = () => {
	config();
	process.on('sveltekit:shutdown', () => void database().close());
};

const reading = new Set(['GET', 'HEAD', 'OPTIONS']);

/** A request id for the log, the audit trail and the person who asks for help; headers that every answer carries. */
const framing: Handle = async ({ event, resolve }) => {
	const begun = performance.now();
	event.locals.requestId = newId();
	event.locals.actor = null;
	event.locals.lockedActor = null;
	event.locals.session = null;
	const response = await resolve(event);
	const { headers } = response;
	headers.set('x-request-id', event.locals.requestId);
	headers.set('x-content-type-options', 'nosniff');
	if (!headers.has('referrer-policy')) headers.set('referrer-policy', 'same-origin');
	headers.set('x-frame-options', 'DENY');
	headers.set('cross-origin-opener-policy', 'same-origin');
	headers.set('cross-origin-resource-policy', 'same-origin');
	headers.set('permissions-policy', 'camera=(self), microphone=(), geolocation=(), payment=()');
	if (config().secure)
		headers.set('strict-transport-security', 'max-age=31536000; includeSubDomains');
	if (!headers.has('cache-control')) headers.set('cache-control', 'no-store');
	const csp = headers.get('content-security-policy');
	// Signing in at the organisation's identity provider is a form that ends there.
	const issuer = config().oidc?.issuer;
	if (csp && issuer)
		headers.set(
			'content-security-policy',
			csp.replace("form-action 'self'", `form-action 'self' ${new URL(issuer).origin}`)
		);
	log.info(
		{
			requestId: event.locals.requestId,
			route: event.route.id,
			method: event.request.method,
			status: response.status,
			ms: Math.round(performance.now() - begun),
			person: personOf(event.locals)
		},
		'request'
	);
	return response;
};

/** Set by the guard while the request was answered. */
const personOf = (locals: App.Locals) => locals.session?.personId;

const usualBody = 1024 * 1024;
const takesFiles = /\/(imports?|scans?)$/;

/** Cookies travel with requests from anywhere; whatever changes something must say that it comes from our own pages. */
const sameOrigin: Handle = async ({ event, resolve }) => {
	if (!reading.has(event.request.method)) {
		const origin = event.request.headers.get('origin');
		if (origin !== config().origin) return turnAway(event, new Refusal('CROSS_SITE'));
		// The server takes large bodies for the sake of imports and scans; nothing else has a use for one.
		const length = Number(event.request.headers.get('content-length') ?? 0);
		if (length > usualBody && !takesFiles.test(event.route.id ?? ''))
			return turnAway(event, new Refusal('TOO_LARGE', { limit: '1 MiB' }));
		if (event.url.pathname.startsWith('/auth/callback/') || event.url.pathname === '/sign-in') {
			try {
				await countTry('address', event.getClientAddress());
			} catch (refused) {
				if (refused instanceof Refusal) return turnAway(event, refused);
				throw refused;
			}
		}
	}
	return resolve(event);
};

/** Who is asking, from the session's row; then whether the route's table lets them in. */
const guard: Handle = async ({ event, resolve }) => {
	const { locals, route, request, params } = event;
	const api = event.url.pathname.startsWith('/api/');
	const refuse = (refusal: Refusal) => turnAway(event, refusal);
	if (route.id === null) return resolve(event);
	const access = accessOf(route.id, request.method);
	if (access === undefined) return refuse(new Refusal('NOT_FOUND'));
	if (route.id === '/healthz' || route.id === '/readyz') return resolve(event);

	const sid = (await locals.auth())?.sid;
	const session = sid ? await findSession(sid, locals.requestId, clock.now()) : null;
	if (session) {
		locals.session = {
			id: session.id,
			locked: session.locked,
			personId: session.actor.personId,
			name: session.actor.name,
			endsAt: session.endsAt
		};
		if (session.locked) locals.lockedActor = session.actor;
		else {
			locals.actor = session.actor;
			// A page left open asks for news by itself; only what a person does counts as being there.
			if (request.headers.get('x-heddle-background') === null) await noteSeen(session.id);
		}
	}
	if (access === 'public') return resolve(event);
	if (!session) {
		if (api || !reading.has(request.method)) return refuse(new Refusal('NOT_SIGNED_IN'));
		return sendTo(
			event,
			`/sign-in?to=${encodeURIComponent(event.url.pathname + event.url.search)}`
		);
	}
	if (session.locked) {
		const unlocking = route.id === '/(app)/locked' || route.id.startsWith('/api/session');
		if (unlocking) return resolve(event);
		if (api || !reading.has(request.method)) return refuse(new Refusal('LOCKED'));
		return sendTo(event, `/locked?to=${encodeURIComponent(event.url.pathname + event.url.search)}`);
	}
	const studyId = params.study ?? null;
	if (!mayEnter(session.actor.grants, access, studyId)) {
		await recordRefusal(
			session.actor,
			access,
			{ studyId },
			{ route: route.id, method: request.method }
		);
		// Whoever has no part in a study learns nothing of it, not even that it exists.
		const stranger = studyId !== null && !mayEnter(session.actor.grants, 'study.enter', studyId);
		return refuse(new Refusal(stranger ? 'NOT_FOUND' : 'NOT_PERMITTED'));
	}
	return resolve(event);
};

/** A sign-in that fails on its way back from the provider ends on the sign-in page, not on an error page. */
const signingIn: Handle = async ({ event, resolve }) => {
	try {
		return await authHandle({ event, resolve });
	} catch (thrown) {
		if (!(thrown instanceof AuthError) || !event.url.pathname.startsWith('/auth/')) throw thrown;
		log.warn({ requestId: event.locals.requestId, type: thrown.type }, 'sign-in');
		return sendTo(event, `/sign-in?error=${thrown.type}`);
	}
};

export const handle = sequence(framing, sameOrigin, signingIn, guard);

export const handleError: HandleServerError = ({ error: thrown, event, status, message }) => {
	if (thrown instanceof Refusal) return { message: thrown.message, code: thrown.code };
	if (status === 404) return { message: 'There is nothing here, or it is not yours to see.' };
	log.error({ err: thrown, requestId: event.locals.requestId, route: event.route.id }, 'fault');
	return {
		message: status >= 500 ? 'Something went wrong on our side. Nothing was half-saved.' : message,
		errorId: event.locals.requestId
	};
};
