/** What became of a file that was sent. */
export interface Sent {
	kind: 'done' | 'refused';
	text: string;
}

/** Sends a file as it is and tells how much of it has gone; a request that tells this is the browser's older one. */
export function sendScan(
	address: string,
	file: File,
	reason: string,
	progress: (fraction: number) => void
): Promise<Sent> {
	return new Promise((done) => {
		const request = new XMLHttpRequest();
		request.open('POST', address);
		request.setRequestHeader('accept', 'application/json');
		request.setRequestHeader('content-type', file.type || 'application/octet-stream');
		request.setRequestHeader(
			'content-disposition',
			`attachment; filename*=UTF-8''${encodeURIComponent(file.name)}`
		);
		if (reason !== '') request.setRequestHeader('x-heddle-reason', encodeURIComponent(reason));
		request.upload.onprogress = (event) => {
			if (event.lengthComputable) progress(event.loaded / event.total);
		};
		request.onload = () => {
			if (request.status === 423) window.dispatchEvent(new Event('heddle:locked'));
			if (request.status === 201) return done({ kind: 'done', text: 'The scan is kept.' });
			let text = 'The server did not answer as expected. Nothing was kept.';
			try {
				const told = JSON.parse(request.responseText) as {
					title?: string;
					errors?: Record<string, string>;
				};
				text = told.errors?.file ?? told.errors?.reason ?? told.title ?? text;
			} catch {
				// Said above.
			}
			done({ kind: 'refused', text });
		};
		request.onerror = () =>
			done({
				kind: 'refused',
				text: 'The network broke off while the file was being sent. Nothing was kept: send it again.'
			});
		request.send(file);
	});
}
