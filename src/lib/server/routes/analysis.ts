import type { RouteTable } from './table';

/** Imports, data cuts, looks, reports, the board room. */
export const analysisRoutes: RouteTable = {
	'/(app)/studies/[study=id]/import': { GET: 'import.run', POST: 'import.run' },
	'/(app)/studies/[study=id]/import/[batch=id]': { GET: 'import.run', POST: 'import.run' },
	'/(app)/studies/[study=id]/cuts': { GET: 'cut.read', POST: 'cut.make' },
	'/(app)/studies/[study=id]/looks': { GET: 'look.read', POST: 'look.pooled' },
	'/(app)/studies/[study=id]/looks/[look=id]': { GET: 'look.read', POST: 'report.make' },
	'/(app)/studies/[study=id]/board': { GET: 'board.read', POST: 'board.read' },
	'/(app)/studies/[study=id]/board/[report=id]/report.pdf': { GET: 'board.read' }
};
