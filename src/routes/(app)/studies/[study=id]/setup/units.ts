import { unitCodes, unitOf } from '$lib/units/units';

/** Units to choose from: as people write them, with the name in words and the UCUM code. */
export const unitOptions = unitCodes.map((code) => {
	const { text, name } = unitOf(code);
	return { value: code as string, label: `${text || '(none)'} · ${name} · ${code}` };
});
