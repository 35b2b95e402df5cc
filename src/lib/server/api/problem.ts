import { Refusal } from '$lib/refusal';
import { log } from '../log';

/** A refusal as RFC 9457 problem details; the fields that need another look stand under "errors". */
export function problem(refusal: Refusal, requestId: string): Response {
	return Response.json(
		{
			type: `urn:heddle:problem:${refusal.code.toLowerCase().replaceAll('_', '-')}`,
			title: refusal.message,
			status: refusal.status,
			detail: refusal.message,
			instance: `urn:heddle:request:${requestId}`,
			code: refusal.code,
			...(Object.keys(refusal.fields).length > 0 ? { errors: refusal.fields } : {})
		},
		{
			status: refusal.status,
			headers: { 'content-type': 'application/problem+json', 'cache-control': 'no-store' }
		}
	);
}

export function fault(error: unknown, requestId: string): Response {
	log.error({ err: error, requestId }, 'fault');
	return Response.json(
		{
			type: 'urn:heddle:problem:fault',
			title: 'Something went wrong on our side. Nothing was half-saved.',
			status: 500,
			detail: `Tell the administrator this number: ${requestId}.`,
			instance: `urn:heddle:request:${requestId}`,
			code: 'FAULT'
		},
		{
			status: 500,
			headers: { 'content-type': 'application/problem+json', 'cache-control': 'no-store' }
		}
	);
}
