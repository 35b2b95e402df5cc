import { readFileSync } from 'node:fs';
import { createRequire } from 'node:module';
import { inflateSync } from 'node:zlib';

const require = createRequire(import.meta.url);

/**
 * A WOFF 1.0 font as the plain font inside it (W3C WOFF File Format 1.0, sections 3 to 5). pdfkit's
 * reader takes WOFF too, but unpacks a whole table again for each glyph: seconds a report.
 */
export function unpackWoff(woff: Buffer): Buffer {
	if (woff.toString('latin1', 0, 4) !== 'wOFF') throw new Error('not a WOFF font');
	const count = woff.readUInt16BE(12);
	const tables = Array.from({ length: count }, (_, i) => {
		const entry = 44 + 20 * i;
		const offset = woff.readUInt32BE(entry + 4);
		const packed = woff.readUInt32BE(entry + 8);
		const length = woff.readUInt32BE(entry + 12);
		const stored = woff.subarray(offset, offset + packed);
		const data = packed < length ? inflateSync(stored) : stored;
		if (data.length !== length) throw new Error('a WOFF table has another length than it says');
		return { tag: woff.subarray(entry, entry + 4), checksum: woff.readUInt32BE(entry + 16), data };
	});
	const directory = Buffer.alloc(12 + 16 * count);
	woff.copy(directory, 0, 4, 8);
	const log = Math.floor(Math.log2(count));
	directory.writeUInt16BE(count, 4);
	directory.writeUInt16BE(16 << log, 6);
	directory.writeUInt16BE(log, 8);
	directory.writeUInt16BE(16 * count - (16 << log), 10);
	const parts: Buffer[] = [directory];
	let offset = directory.length;
	for (const [i, { tag, checksum, data }] of tables.entries()) {
		const entry = 12 + 16 * i;
		tag.copy(directory, entry);
		directory.writeUInt32BE(checksum, entry + 4);
		directory.writeUInt32BE(offset, entry + 8);
		directory.writeUInt32BE(data.length, entry + 12);
		const padding = Buffer.alloc((4 - (data.length % 4)) % 4);
		parts.push(data, padding);
		offset += data.length + padding.length;
	}
	return Buffer.concat(parts);
}

const unpacked = new Map<string, Buffer>();

/** A face of Atkinson Hyperlegible; read once, never changed. */
export function face(subset: 'latin' | 'latin-ext', weight: 400 | 700): Buffer {
	const name = `atkinson-hyperlegible-${subset}-${weight}-normal.woff`;
	let font = unpacked.get(name);
	if (!font) {
		font = unpackWoff(
			readFileSync(require.resolve(`@fontsource/atkinson-hyperlegible/files/${name}`))
		);
		unpacked.set(name, font);
	}
	return font;
}
