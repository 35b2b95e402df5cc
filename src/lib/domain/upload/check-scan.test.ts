import { crc32, deflateSync } from 'node:zlib';
import { describe, expect, test } from 'vitest';
import { checkScan } from './check-scan.server';

/** Files as small as their kinds allow, made here; a broken one differs in one thing from a whole one. */
const chunk = (type: string, data: Buffer) => {
	const body = Buffer.concat([Buffer.from(type, 'latin1'), data]);
	const out = Buffer.alloc(body.length + 8);
	out.writeUInt32BE(data.length, 0);
	body.copy(out, 4);
	out.writeUInt32BE(crc32(body), body.length + 4);
	return out;
};
export function png(width = 2, height = 2): Buffer {
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
export function jpeg(width = 2, height = 2): Buffer {
	const frame = Buffer.from([0xff, 0xc0, 0, 11, 8, 0, 0, 0, 0, 1, 1, 0x11, 0]);
	frame.writeUInt16BE(height, 5);
	frame.writeUInt16BE(width, 7);
	return Buffer.concat([
		Buffer.from([0xff, 0xd8, 0xff, 0xe0, 0, 4, 0, 0]),
		frame,
		Buffer.from([0xff, 0xda, 0, 8, 1, 1, 0, 0, 63, 0, 1, 2, 3, 0xff, 0xd9])
	]);
}
export const pdf = (objects = '1 0 obj << /Type /Catalog /Pages 2 0 R >> endobj'): Buffer =>
	Buffer.from(
		`%PDF-1.7\n${objects}\n2 0 obj << /Type /Pages /Kids [] /Count 0 >> endobj\ntrailer << /Root 1 0 R >>\nstartxref\n0\n%%EOF\n`,
		'latin1'
	);
const packed = (
	inside: string,
	dictionary = '/Type /ObjStm /N 1 /First 4 /Filter /FlateDecode'
) => {
	const body = deflateSync(Buffer.from(inside, 'latin1'));
	return pdf(
		`5 0 obj << ${dictionary} /Length ${body.length} >> stream\n${body.toString('latin1')}\nendstream endobj`
	);
};
const why = (bytes: Buffer, said = {}) => {
	const checked = checkScan(bytes, said);
	return checked.ok ? checked.kind : checked.why;
};

describe('what a scan may be', () => {
	test('is told by its content', () => {
		expect(why(pdf())).toBe('pdf');
		expect(why(png())).toBe('png');
		expect(why(jpeg())).toBe('jpeg');
	});
	test('and by nothing that says otherwise', () => {
		expect(why(png(), { name: 'form.png', type: 'image/png' })).toBe('png');
		expect(why(png(), { name: 'form.pdf' })).toContain('“.pdf”, but what is in it is a PNG image');
		expect(why(png(), { name: 'form' })).toContain('nothing that says what it is');
		expect(why(pdf(), { name: 'form.pdf', type: 'image/png' })).toContain('sent as image/png');
		expect(why(Buffer.from('<html><script>alert(1)</script>'), { name: 'form.pdf' })).toContain(
			'none of the kinds'
		);
		expect(why(Buffer.from('MZ\u0090\u0000programme'), { name: 'form.png' })).toContain(
			'none of the kinds'
		);
	});
	test('other kinds are refused with what to do', () => {
		expect(why(Buffer.from('\u0000\u0000\u0000\u0018ftypheic\u0000\u0000'))).toContain('HEIC');
		expect(why(Buffer.from('PK\u0003\u0004docx'))).toContain('Save the form as PDF');
		expect(why(Buffer.from('II*\u0000tiff'))).toContain('TIFF');
		expect(why(Buffer.from('GIF89a...'))).toContain('not taken');
		expect(why(Buffer.alloc(0))).toContain('0 bytes');
		expect(why(Buffer.concat([png(), Buffer.alloc(20 * 1024 * 1024)]))).toContain('too large');
	});
	test('a file that is cut off is said to be', () => {
		for (const whole of [png(), jpeg(), pdf()])
			for (const cut of [0.5, 0.9])
				expect(why(whole.subarray(0, Math.floor(whole.length * cut)))).toMatch(
					/cut off|damaged|not a whole/
				);
	});
	test('an image that would unpack to more than 100 million points is refused by its head', () => {
		expect(why(png(10_000, 10_000))).toBe('png');
		expect(why(png(10_001, 10_000))).toContain('more than 100 million');
		expect(why(png(0xffffffff, 0xffffffff))).toContain('more than 100 million');
		expect(why(jpeg(65_535, 65_535))).toContain('more than 100 million');
		expect(why(png(0, 5))).toContain('damaged');
		const broken = png();
		broken.writeUInt32BE(7, 16);
		expect(why(broken)).toContain('checksum');
	});
});

describe('what a PDF may not hold', () => {
	test.each([
		['a script', '<< /S /JavaScript /JS (app.alert(1)) >>'],
		['a script', '<< /S /J#61v#61Script >>'],
		['a script', '<< /JS 7 0 R >>'],
		['starts a program', '<< /S /Launch /F (cmd.exe) >>'],
		['another file', '<< /Names << /EmbeddedFiles 4 0 R >> >>'],
		['another file', '<< /Type /Embedded#46ile >>'],
		['sends data away', '<< /S /SubmitForm >>'],
		['runs a program', '<< /XFA [] >>']
	])('%s: %s', (what, objects) => {
		expect(why(pdf(`1 0 obj ${objects} endobj`))).toContain(what);
		// The same, packed in an object stream, and within what only looks like another stream.
		expect(why(packed(`1 0 ${objects}`))).toContain(what);
		const hidden = packed(`1 0 ${objects}`).toString('latin1').slice(9);
		expect(why(pdf(`9 0 obj << /Length 9999 >> stream\n${hidden}\nendobj`))).toContain(what);
	});
	test('what cannot be checked', () => {
		expect(why(pdf('1 0 obj << /Encrypt 3 0 R >> endobj'))).toContain('locked');
		expect(
			why(packed('1 0 << >>', '/Type /ObjStm /N 1 /First 4 /Filter [/ASCIIHexDecode /FlateDecode]'))
		).toContain('cannot be checked');
		expect(why(packed('1 0 << >>', '/Type /ObjStm /N 1 /First 4 /Filter /LZWDecode'))).toContain(
			'cannot be checked'
		);
		// 64 million spaces pack into a few kilobytes.
		expect(why(packed(' '.repeat(64 * 1024 * 1024)))).toContain('cannot be checked');
	});
	test('pictures that happen to hold the short letters are no script', () => {
		expect(
			why(pdf('4 0 obj << /Subtype /Image /Length 12 >> stream\n../JS(..\nendstream endobj'))
		).toBe('pdf');
		expect(why(pdf('1 0 obj << /OpenAction [3 0 R /Fit] >> endobj'))).toBe('pdf');
		expect(why(packed('1 0 << /Type /Catalog >>'))).toBe('pdf');
	});
});
