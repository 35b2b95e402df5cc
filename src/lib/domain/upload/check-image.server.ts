import { crc32 } from 'node:zlib';

/** Width and height, or what is wrong with the file in words. Nothing is unpacked: the head says how large it would be. */
export type ImageHead = { width: number; height: number } | string;

const brokenOff = 'The file is cut off: it ends before the image does. Send it again.';

const pngSignature = Buffer.from('89504e470d0a1a0a', 'hex');
export const isPng = (bytes: Buffer) => bytes.subarray(0, 8).equals(pngSignature);

/**
 * Walks the chunks of a PNG from its head to its end.
 * Source: W3C Portable Network Graphics (Third Edition) §5 (from memory).
 */
export function pngHead(bytes: Buffer): ImageHead {
	let head: { width: number; height: number } | null = null;
	for (let at = 8; at + 12 <= bytes.length;) {
		const length = bytes.readUInt32BE(at);
		const end = at + 12 + length;
		if (end > bytes.length) return brokenOff;
		const type = bytes.toString('latin1', at + 4, at + 8);
		if (!head) {
			if (type !== 'IHDR' || length !== 13)
				return 'This is not a whole PNG image: its head is missing.';
			if (crc32(bytes.subarray(at + 4, end - 4)) !== bytes.readUInt32BE(end - 4))
				return 'This PNG image is damaged: its head does not match its checksum.';
			head = { width: bytes.readUInt32BE(at + 8), height: bytes.readUInt32BE(at + 12) };
		} else if (type === 'IEND') return head;
		at = end;
	}
	return brokenOff;
}

export const isJpeg = (bytes: Buffer) =>
	bytes[0] === 0xff && bytes[1] === 0xd8 && bytes[2] === 0xff;

const isFrame = (marker: number) =>
	marker >= 0xc0 && marker <= 0xcf && marker !== 0xc4 && marker !== 0xc8 && marker !== 0xcc;

/**
 * Walks the segments of a JPEG to its frame, and looks for its end.
 * Source: ITU-T T.81 Annex B (from memory).
 */
export function jpegHead(bytes: Buffer): ImageHead {
	let head: { width: number; height: number } | null = null;
	let at = 2;
	while (at + 4 <= bytes.length) {
		if (bytes[at] !== 0xff)
			return 'This is not a whole JPEG image: its parts do not follow each other.';
		const marker = bytes[at + 1] as number;
		if (marker === 0xff) {
			at += 1;
			continue;
		}
		const length = bytes.readUInt16BE(at + 2);
		if (length < 2 || at + 2 + length > bytes.length) return brokenOff;
		if (isFrame(marker)) {
			if (length < 8) return 'This JPEG image is damaged: its head is too short.';
			head = { height: bytes.readUInt16BE(at + 5), width: bytes.readUInt16BE(at + 7) };
		}
		at += 2 + length;
		if (marker === 0xda) break;
	}
	if (!head) return 'This is not a whole JPEG image: it has no picture in it.';
	// Some scanners write a few bytes after the end.
	return bytes.lastIndexOf(Buffer.from([0xff, 0xd9])) >= at ? head : brokenOff;
}
