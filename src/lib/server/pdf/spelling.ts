/** Says whether some face at hand can draw a character. */
export type HasGlyph = (codePoint: number) => boolean;

const GREEK: Record<string, string> = Object.fromEntries(
	[
		'αalpha βbeta γgamma δdelta εepsilon ζzeta ηeta θtheta ιiota κkappa λlambda νnu ξxi οomicron',
		'πpi ρrho σsigma ςsigma τtau υupsilon φphi ϕphi χchi ψpsi ωomega ϵepsilon ϑtheta'
	]
		.join(' ')
		.split(' ')
		.flatMap((entry) => {
			const letter = entry.charAt(0);
			const name = entry.slice(1);
			const upper = letter.toUpperCase();
			return [
				[letter, name],
				...(upper !== letter ? [[upper, name.charAt(0).toUpperCase() + name.slice(1)]] : [])
			];
		})
);

/** What stands for a character that no face at hand can draw. */
const WORDS: Record<string, string> = {
	...GREEK,
	μ: 'µ',
	Μ: 'M',
	'≥': '>=',
	'≤': '<=',
	'≠': 'not =',
	'≈': '~',
	'≡': '=',
	'∞': 'infinity',
	'√': 'root ',
	'∑': 'sum ',
	'∫': 'integral ',
	'∂': 'd',
	'∝': 'proportional to',
	'∈': 'in',
	'∼': '~',
	'→': '->',
	'←': '<-',
	'⇒': '=>',
	'✓': 'yes',
	'✔': 'yes',
	'✗': 'no',
	'✘': 'no',
	'✱': '*',
	'★': '*',
	'◆': '*',
	'‰': ' per mille',
	'′': "'",
	'″': '"',
	'⋅': '·',
	'∙': '·',
	'∗': '*',
	'⁄': '/',
	'∕': '/',
	ℓ: 'l',
	'‡': '**',
	'‐': '-',
	'‑': '-',
	'‒': '–',
	'―': '—',
	'⁺': '+',
	'⁻': '−'
};

const SUPERSCRIPTS = /[⁰¹²³⁴⁵⁶⁷⁸⁹⁺⁻]+/gu;
const RAISED = '⁰¹²³⁴⁵⁶⁷⁸⁹';
const LOWERED = '₀₁₂₃₄₅₆₇₈₉';

// Control characters, the invisible ones that reorder or hide text, and variation selectors.
const INVISIBLE = /\p{Cc}|\p{Cf}|\p{VS}/gu;

/**
 * `text` with every character that `has` refuses put into ones it accepts: Greek and mathematics by
 * name (σ becomes sigma), powers with a caret, letters with an unknown accent without it, the rest by
 * number ([U+4E2D]). Nothing is ever an empty box, and nothing vanishes from the text.
 */
export function spell(text: string, has: HasGlyph): string {
	const known = (s: string) => [...s].every((c) => has(c.codePointAt(0)!));
	const whole = text
		.normalize('NFC')
		.replace(/[\n\t\u2028\u2029]/g, ' ')
		.replace(INVISIBLE, '')
		.replace(/[\u2000-\u200a\u202f\u205f\u3000]/g, ' ');
	if (known(whole)) return whole;
	const powers = whole.replace(SUPERSCRIPTS, (run) => {
		if (known(run)) return run;
		const plain = [...run].map((c) =>
			RAISED.includes(c) ? String(RAISED.indexOf(c)) : (WORDS[c] ?? c)
		);
		return `^${plain.join('')}`;
	});
	return [...powers].map((c) => (has(c.codePointAt(0)!) ? c : spellOne(c, known))).join('');
}

function spellOne(c: string, known: (s: string) => boolean): string {
	const word = WORDS[c];
	if (word !== undefined && known(word)) return word;
	if (LOWERED.includes(c)) return String(LOWERED.indexOf(c));
	// Accents are given up from the last, until a letter that can be drawn is left.
	const parts = [...c.normalize('NFKD')];
	for (let kept = parts.length; kept > 0; kept--) {
		const letter = parts.slice(0, kept).join('').normalize('NFC');
		const spelled = letter === c ? c : [...letter].map((l) => WORDS[l] ?? l).join('');
		if (known(spelled) && parts.slice(kept).every((mark) => /\p{M}/u.test(mark))) return spelled;
	}
	return `[U+${c.codePointAt(0)!.toString(16).toUpperCase().padStart(4, '0')}]`;
}
