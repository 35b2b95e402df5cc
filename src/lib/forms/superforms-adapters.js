// Stands in for the package's barrel of adapters (see vite.config.ts).
export {
	zod as zod4,
	zodClient as zod4Client
} from '../../../node_modules/sveltekit-superforms/dist/adapters/zod4.js';
