interface State {
	status: 'uploaded' | 'checking' | 'checked' | 'importing' | 'imported' | 'failed';
	problemCount: number | null;
}

/** What became of a file, with the tag that says so. */
export function importWords({ status, problemCount }: State): { text: string; tag: string } {
	switch (status) {
		case 'uploaded':
			return { text: 'handed in', tag: 'tag-plain' };
		case 'checking':
			return { text: 'being checked', tag: 'tag-soon' };
		case 'importing':
			return { text: 'being imported', tag: 'tag-soon' };
		case 'imported':
			return { text: 'imported', tag: 'tag-kept' };
		case 'failed':
			return { text: 'failed, nothing kept', tag: 'tag-lost' };
		case 'checked':
			return problemCount === 0
				? { text: 'checked, no problem', tag: 'tag-kept' }
				: { text: problemsText(problemCount ?? 0), tag: 'tag-lost' };
	}
}

export const problemsText = (count: number): string =>
	count === 1 ? '1 problem' : `${count.toLocaleString('en-GB')} problems`;

export function sizeText(bytes: number): string {
	if (bytes < 1024) return `${bytes} B`;
	if (bytes < 1024 * 1024) return `${(bytes / 1024).toFixed(1)} kB`;
	return `${(bytes / 1024 / 1024).toFixed(1)} MB`;
}
