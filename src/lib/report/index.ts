export { residualData, trajectoryData } from './charts';
export * from './format';
export { ReportFault, type LookReportInput } from './input';
export { lookReport } from './look-report';
export { names } from './names';
export * from './tree';
