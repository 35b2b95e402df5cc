import { inflateSync } from 'node:zlib';

/**
 * Whether a PDF only holds pages. What runs by itself, opens programs or carries other files is refused: a scan needs none
 * of it. Names may be written with #-escapes, and objects may lie packed in object streams, so both are undone first.
 * Source: ISO 32000-2 §7.3.5 (names), §7.5.7 (object streams), §12.6.4 (action types); from memory.
 */
const forbidden: [string, string][] = [
	['JavaScript', 'a script'],
	['Launch', 'an action that starts a program'],
	['EmbeddedFile', 'another file inside it'],
	['EmbeddedFiles', 'another file inside it'],
	['RichMedia', 'moving pictures or sound'],
	['SubmitForm', 'a form that sends data away'],
	['ImportData', 'a form that reads other files'],
	['GoToE', 'a jump into another file inside it']
];
/** Short names turn up by chance in packed pictures, so they count only where objects stand. */
const forbiddenInObjects: [string, string][] = [
	['JS', 'a script'],
	['XFA', 'a form that runs a program']
];

const escaped = (name: string) =>
	[...name]
		.map((letter) => {
			const code = letter.charCodeAt(0).toString(16).padStart(2, '0');
			return `(?:${letter}|#${code.replace(/[a-f]/g, (digit) => `[${digit}${digit.toUpperCase()}]`)})`;
		})
		.join('');
const named = (name: string) => new RegExp(`/${escaped(name)}(?![A-Za-z0-9#])`);

const everywhere = forbidden.map(([name, what]) => ({ seen: named(name), what }));
const inObjects = [...forbidden, ...forbiddenInObjects].map(([name, what]) => ({
	seen: named(name),
	what
}));
const encrypted = named('Encrypt');
const objectStream = new RegExp(`/${escaped('Type')}\\s*/${escaped('ObjStm')}(?![A-Za-z0-9#])`);
const onlyFlate = new RegExp(
	`/(?:${escaped('Filter')})\\s*(?:/${escaped('FlateDecode')}|\\[\\s*/${escaped('FlateDecode')}\\s*\\])`
);
const anyFilter = named('Filter');

const shaped = new RegExp(`/(?:${escaped('DecodeParms')}|${escaped('DP')})(?![A-Za-z0-9#])`);
const unreadable =
	'This PDF is packed in a way that cannot be checked. Print it to a new PDF and send that.';

/** More than all the objects of a scan: a packed bomb stops here. */
const mostUnpacked = 16 * 1024 * 1024;
const mostStreams = 2000;

export const isPdf = (bytes: Buffer) => bytes.subarray(0, 5).toString('latin1') === '%PDF-';

const refusal = (what: string) =>
	`This PDF holds ${what}, which a scan does not need. Print the form to a new PDF, or scan it again.`;

/** What is wrong with the file, in words; null when nothing is. */
export function pdfTrouble(bytes: Buffer): string | null {
	const text = bytes.toString('latin1');
	if (!/^%PDF-[12]\.\d/.test(text)) return 'This is not a whole PDF: its head is damaged.';
	const tail = text.slice(-2048);
	if (!tail.includes('%%EOF') || !tail.includes('startxref'))
		return 'The file is cut off: it ends before the PDF does. Send it again.';
	for (const { seen, what } of everywhere) if (seen.test(text)) return refusal(what);
	const objects = objectsOf(text);
	if (encrypted.test(objects))
		return 'This PDF is locked by a password or by rights, so what is in it cannot be checked. Save it without, and send it again.';
	for (const { seen, what } of inObjects) if (seen.test(objects)) return refusal(what);
	const { packed, strange } = packedObjects(text);
	if (strange || packed.length > mostStreams) return unreadable;
	let room = mostUnpacked;
	for (const [from, to] of packed) {
		let inside: string;
		try {
			const unpacked = inflateSync(bytes.subarray(from, to), {
				maxOutputLength: Math.max(1, room)
			});
			room -= unpacked.length;
			inside = unpacked.toString('latin1');
		} catch {
			return unreadable;
		}
		for (const { seen, what } of inObjects) if (seen.test(inside)) return refusal(what);
	}
	return null;
}

const endOfStream = 'endstream';

/** Where packed objects lie, wherever a reader might find them: also within what only looks like another stream. */
function packedObjects(text: string): { packed: [number, number][]; strange: boolean } {
	const packed: [number, number][] = [];
	let strange = false;
	const every = new RegExp(objectStream.source, 'g');
	for (let found = every.exec(text); found; found = every.exec(text)) {
		const begin = /\bstream\r?\n/g;
		begin.lastIndex = found.index;
		const opened = begin.exec(text);
		if (!opened) continue;
		const before = text.slice(Math.max(0, found.index - 4096), opened.index);
		const dictionary = before.slice(before.lastIndexOf(' obj') + 1);
		const start = opened.index + opened[0].length;
		const end = text.indexOf(endOfStream, start);
		// Not packed at all: it was read with everything else.
		if (!anyFilter.test(dictionary)) continue;
		if (!onlyFlate.test(dictionary) || shaped.test(dictionary)) strange = true;
		else packed.push([start, end < 0 ? text.length : end]);
	}
	return { packed, strange };
}

/** The text of the file without what its streams hold, unless that is objects. */
function objectsOf(text: string): string {
	const parts: string[] = [];
	const begin = /\bstream\r?\n/g;
	let from = 0;
	for (let found = begin.exec(text); found; found = begin.exec(text)) {
		const head = text.slice(Math.max(from, found.index - 4096), found.index);
		const dictionary = head.slice(head.lastIndexOf(' obj') + 1);
		const end = text.indexOf(endOfStream, found.index);
		parts.push(text.slice(from, found.index));
		if (end < 0) {
			parts.push(text.slice(found.index));
			return parts.join('\n');
		}
		if (objectStream.test(dictionary)) parts.push(text.slice(found.index, end));
		from = end;
		begin.lastIndex = end;
	}
	parts.push(text.slice(from));
	return parts.join('\n');
}
