import type { RouteTable } from './table';

const study = '/(app)/studies/[study=id]';
const api = '/api/studies/[study=id]';

/** Imports, data cuts, looks, reports, the board room. */
export const analysisRoutes: RouteTable = {
	[`${study}/import`]: { GET: 'import.run', POST: 'import.run' },
	[`${study}/import/[batch=id]`]: { GET: 'import.run', POST: 'import.run' },
	[`${study}/import/[batch=id]/problems.csv`]: { GET: 'import.run' },
	[`${study}/cuts`]: { GET: 'cut.read', POST: 'cut.read' },
	[`${study}/cuts/[cut=id]/content.csv`]: { GET: 'cut.export' },
	[`${study}/cuts/[cut=id]/content.json`]: { GET: 'cut.export' },
	[`${study}/looks`]: { GET: 'look.read', POST: 'look.act' },
	[`${study}/looks/[look=id]`]: { GET: 'look.read', POST: 'look.act' },
	[`${study}/looks/[look=id]/report.pdf`]: { GET: 'report.read' },
	[`${study}/board`]: { GET: 'board.read', POST: 'board.recommend' },
	[`${study}/board/[report=id]/report.pdf`]: { GET: 'board.download' },

	[`${api}/imports`]: { GET: 'import.run', POST: 'import.run' },
	[`${api}/imports/[batch=id]`]: { GET: 'import.run' },
	[`${api}/imports/[batch=id]/mapping`]: { PUT: 'import.run' },
	[`${api}/imports/[batch=id]/check`]: { POST: 'import.run' },
	[`${api}/imports/[batch=id]/run`]: { POST: 'import.run' },
	[`${api}/cuts`]: { GET: 'cut.read', POST: 'cut.make' },
	[`${api}/cuts/[cut=id]`]: { GET: 'cut.read' },
	[`${api}/cuts/[cut=id]/remaking`]: { GET: 'cut.read' },
	[`${api}/plan`]: { GET: 'look.read', POST: 'plan.sign' },
	[`${api}/looks`]: { GET: 'look.read', POST: 'look.pooled' },
	[`${api}/looks/[look=id]`]: { GET: 'look.read' },
	[`${api}/looks/[look=id]/report`]: { GET: 'report.read', POST: 'report.make' },
	[`${api}/reports/[report=id]/releases`]: { POST: 'report.release' },
	[`${api}/releases/[release=id]/approval`]: { POST: 'report.approve-release' },
	[`${api}/board`]: { GET: 'board.read' },
	[`${api}/recommendations`]: { POST: 'board.recommend' }
};
