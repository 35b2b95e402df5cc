import { isJpeg, isPng, jpegHead, pngHead } from './check-image.server';
import { isPdf, pdfTrouble } from './check-pdf.server';
import { scanHint, scanLimits, scanTypes, type ScanKind } from './scan';

export type CheckedScan = { ok: true; kind: ScanKind } | { ok: false; why: string };

const no = (why: string): CheckedScan => ({ ok: false, why });

/** Other things that people send, by their first bytes, and what to do about them. */
function otherwise(bytes: Buffer): string {
	const brand = bytes.toString('latin1', 4, 12);
	if (/^ftyp(heic|heix|hevc|heim|heis|mif1|msf1|heif)/.test(brand))
		return 'This is a HEIC photo, which many programs cannot open. On the telephone choose “Most compatible” in the camera’s format settings and take it again, or save it as JPEG or PDF.';
	const head = bytes.toString('latin1', 0, 8);
	if (head.startsWith('PK'))
		return `This is an archive or an office document. Save the form as PDF. ${scanHint}`;
	if (head.startsWith('II*\u0000') || head.startsWith('MM\u0000*'))
		return `This is a TIFF image. Save it as PDF, PNG or JPEG.`;
	if (
		head.startsWith('GIF8') ||
		brand.slice(4) === 'WEBP' ||
		bytes.toString('latin1', 8, 12) === 'WEBP'
	)
		return `This kind of image is not taken. ${scanHint}`;
	return `What is in the file is none of the kinds that are taken. ${scanHint}`;
}

function kindOf(bytes: Buffer): ScanKind | null {
	if (isPdf(bytes)) return 'pdf';
	if (isPng(bytes)) return 'png';
	return isJpeg(bytes) ? 'jpeg' : null;
}

/**
 * What a file is by its content, and whether it is whole and harmless. The name and the type it was sent under must
 * agree: a file that says it is something else is not kept.
 */
export function checkScan(
	bytes: Buffer,
	said: { name?: string | null; type?: string | null }
): CheckedScan {
	if (bytes.length === 0) return no('The file is empty: it has 0 bytes.');
	if (bytes.length > scanLimits.bytes) return no(`The file is too large. ${scanHint}`);
	const kind = kindOf(bytes);
	if (!kind) return no(otherwise(bytes));
	const { name, type, extensions } = scanTypes[kind];
	const extension = /\.([^.]*)$/.exec(said.name ?? '')?.[1]?.toLowerCase();
	if (said.name && (extension === undefined || !extensions.includes(extension)))
		return no(
			`The file’s name ends in ${extension ? `“.${extension}”` : 'nothing that says what it is'}, but what is in it is a ${name}. Give it a name that ends in .${extensions[0]} if it is the right file.`
		);
	const sent = said.type?.split(';')[0]?.trim().toLowerCase();
	if (sent && sent !== 'application/octet-stream' && sent !== type)
		return no(`The file was sent as ${sent}, but what is in it is a ${name}. Nothing was kept.`);
	if (kind === 'pdf') {
		const trouble = pdfTrouble(bytes);
		return trouble ? no(trouble) : { ok: true, kind };
	}
	const head = kind === 'png' ? pngHead(bytes) : jpegHead(bytes);
	if (typeof head === 'string') return no(head);
	if (head.width === 0 || head.height === 0) return no('This image has no size: it is damaged.');
	const pixels = head.width * head.height;
	if (pixels > scanLimits.megapixels * 1e6)
		return no(
			`This image is ${head.width} × ${head.height} points large, more than ${scanLimits.megapixels} million. Scan it with fewer dots an inch; 300 are enough.`
		);
	return { ok: true, kind };
}
