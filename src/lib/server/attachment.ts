/** A file to be kept, never shown in place; nothing on the way may keep a copy. */
export const attachment = (body: Buffer | string, name: string, type: string): Response =>
	new Response(typeof body === 'string' ? body : new Uint8Array(body), {
		headers: {
			'content-type': type,
			'content-disposition': `attachment; filename="${name}"`,
			'cache-control': 'no-store'
		}
	});
