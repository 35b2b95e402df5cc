/** The colours a chart draws with. On screen they follow the theme; on paper they are fixed. */
export interface ChartPalette {
	ink: string;
	muted: string;
	axis: string;
	rule: string;
	sheet: string;
	mark: string;
	limit: string;
	groups: readonly [string, string, string];
}

export const screenPalette: ChartPalette = {
	ink: 'currentColor',
	muted: 'var(--muted)',
	axis: 'var(--rule-strong)',
	rule: 'var(--rule)',
	sheet: 'var(--sheet)',
	mark: 'var(--act)',
	limit: 'var(--muted)',
	groups: ['var(--arm-a)', 'var(--arm-b)', 'var(--arm-c)']
};

export const paperPalette: ChartPalette = {
	ink: '#16213f',
	muted: '#54402f',
	axis: '#94856d',
	rule: '#d9cdb8',
	sheet: '#ffffff',
	mark: '#28396b',
	limit: '#54402f',
	groups: ['#28396b', '#8a4a12', '#17606a']
};

/** Solid, dashed, dotted: which line it is must be seen without colour. */
export const dashes: readonly (string | undefined)[] = [undefined, '9 5', '2 4'];

export const groupColour = (palette: ChartPalette, group: number): string =>
	palette.groups[group % 3] ?? palette.groups[0];
export const groupDash = (group: number): string | undefined => dashes[group % 3];
