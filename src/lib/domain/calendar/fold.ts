const encoder = new TextEncoder();
const mostOctets = 75;

/**
 * Content lines of at most 75 octets, continued after CRLF and one space, and never cut inside a character.
 * Source: RFC 5545 §3.1. Lines that are folded already are unfolded first, so that folding twice changes nothing.
 */
export function fold(text: string): string {
	const unfolded = text.replace(/\r\n[ \t]/g, '');
	return unfolded.split('\r\n').map(foldLine).join('\r\n');
}

function foldLine(line: string): string {
	if (encoder.encode(line).length <= mostOctets) return line;
	const lines: string[] = [];
	let current = '';
	let octets = 0;
	for (const character of line) {
		const size = encoder.encode(character).length;
		if (octets + size > mostOctets) {
			lines.push(current);
			current = ' ';
			octets = 1;
		}
		current += character;
		octets += size;
	}
	lines.push(current);
	return lines.join('\r\n');
}
