/** Natural-dye tokens: each name is a role, its value a custom property set in src/app.css for light and dark. */
const token = (name) => `var(--${name})`;
const tokens = [
	'ground',
	'sheet',
	'wash',
	'rule',
	'rule-strong',
	'ink',
	'muted',
	'act',
	'act-soft',
	'on-act',
	'kept',
	'kept-soft',
	'soon',
	'soon-fill',
	'soon-soft',
	'lost',
	'lost-soft',
	'off',
	'off-soft',
	'arm-a',
	'arm-b',
	'arm-c'
];

export default {
	content: ['./src/**/*.{html,svelte,ts}'],
	theme: {
		colors: {
			transparent: 'transparent',
			current: 'currentColor',
			...Object.fromEntries(tokens.map((name) => [name, token(name)]))
		},
		fontFamily: { sans: ['"Atkinson Hyperlegible"', 'sans-serif'] },
		// Nothing a person reads is smaller than 14 px; body text is 16.
		fontSize: {
			small: ['0.875rem', '1.35'],
			base: ['1rem', '1.45'],
			lead: ['1.25rem', '1.35'],
			title: ['1.875rem', '1.2'],
			entry: ['1.625rem', '1.2']
		},
		extend: {
			minHeight: { target: '3rem', field: '3.75rem' },
			borderRadius: { sheet: '6px', control: '4px', slot: '3px' }
		}
	}
};
