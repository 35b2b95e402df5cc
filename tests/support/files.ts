import { crc32, deflateSync } from 'node:zlib';

/** Whole files as small as their kinds allow, made here. */
export const pdfOf = (objects: string): Buffer =>
	Buffer.from(
		`%PDF-1.7\n${objects}\n2 0 obj << /Type /Pages /Kids [] /Count 0 >> endobj\ntrailer << /Root 1 0 R >>\nstartxref\n0\n%%EOF\n`,
		'latin1'
	);
export const smallPdf = pdfOf('1 0 obj << /Type /Catalog /Pages 2 0 R >> endobj');

const chunk = (type: string, data: Buffer) => {
	const body = Buffer.concat([Buffer.from(type, 'latin1'), data]);
	const out = Buffer.alloc(body.length + 8);
	out.writeUInt32BE(data.length, 0);
	body.copy(out, 4);
	out.writeUInt32BE(crc32(body), body.length + 4);
	return out;
};
export function pngOf(width: number, height: number): Buffer {
	const head = Buffer.alloc(13);
	head.writeUInt32BE(width, 0);
	head.writeUInt32BE(height, 4);
	head.set([8, 0, 0, 0, 0], 8);
	return Buffer.concat([
		Buffer.from('89504e470d0a1a0a', 'hex'),
		chunk('IHDR', head),
		chunk('IDAT', deflateSync(Buffer.alloc(6))),
		chunk('IEND', Buffer.alloc(0))
	]);
}
