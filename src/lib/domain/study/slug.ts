/** A key made from a name: 'Month 6' is month-6; one that is taken gets a number. */
export function keyFrom(name: string, otherwise: string, taken: readonly string[]): string {
	const plain = name
		.normalize('NFKD')
		.toLowerCase()
		.replace(/[\u0300-\u036f]/g, '')
		.replace(/[^a-z0-9]+/g, '-')
		.replace(/^[^a-z]+|-+$/g, '')
		.slice(0, 34)
		.replace(/-+$/, '');
	const stem = plain === '' ? otherwise : plain;
	if (!taken.includes(stem)) return stem;
	let n = 2;
	while (taken.includes(`${stem}-${n}`)) n++;
	return `${stem}-${n}`;
}
