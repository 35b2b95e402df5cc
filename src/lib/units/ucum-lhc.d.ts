declare module '@lhncbc/ucum-lhc' {
	interface Utils {
		validateUnitString(code: string): { status: 'valid' | 'invalid' | 'error' };
		convertUnitTo(
			from: string,
			value: number,
			to: string,
			options?: { molecularWeight?: number }
		): { status: 'succeeded' | 'failed' | 'error'; toVal: number | null };
	}
	export const UcumLhcUtils: { getInstance(): Utils };
}
