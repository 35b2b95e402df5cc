/** What a scan of a signed form may be. */
export const scanKinds = ['pdf', 'png', 'jpeg'] as const;
export type ScanKind = (typeof scanKinds)[number];

export const scanTypes: Record<ScanKind, { name: string; type: string; extensions: string[] }> = {
	pdf: { name: 'PDF', type: 'application/pdf', extensions: ['pdf'] },
	png: { name: 'PNG image', type: 'image/png', extensions: ['png'] },
	jpeg: { name: 'JPEG image', type: 'image/jpeg', extensions: ['jpg', 'jpeg'] }
};

export const scanLimits = {
	bytes: 20 * 1024 * 1024,
	/** A page scanned at 1,200 dots an inch has 140 million; nobody needs that to read a signature. */
	megapixels: 100
};
export const scanLimitWords = `${scanLimits.bytes / 1024 / 1024} MB`;

/** Said where a file is chosen. */
export const scanHint = `PDF, PNG or JPEG, at most ${scanLimitWords}.`;
