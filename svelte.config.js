import adapter from '@sveltejs/adapter-node';
import { vitePreprocess } from '@sveltejs/vite-plugin-svelte';

// Tests build beside a running `npm start`, so both output folders come from the environment.
const out = process.env.HEDDLE_BUILD_DIR ?? 'build';

export default {
	preprocess: vitePreprocess(),
	compilerOptions: {
		// By function, so that libraries written for the older syntax still compile.
		runes: ({ filename }) => (filename.includes('node_modules') ? undefined : true)
	},
	kit: {
		adapter: adapter({ out }),
		outDir: process.env.HEDDLE_KIT_DIR ?? '.svelte-kit',
		csp: {
			mode: 'auto',
			directives: {
				'default-src': ['self'],
				'script-src': ['self'],
				'style-src': ['self', 'unsafe-inline'],
				'img-src': ['self', 'data:', 'blob:'],
				'connect-src': ['self'],
				'worker-src': ['self'],
				'object-src': ['none'],
				'base-uri': ['none'],
				'frame-ancestors': ['none'],
				'form-action': ['self']
			}
		}
	}
};
