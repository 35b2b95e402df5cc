/** The few functions of jstat used here; the package brings no types of its own. */
declare module 'jstat' {
	interface JStat {
		chisquare: { inv(p: number, df: number): number };
		studentt: { inv(p: number, df: number): number };
	}
	const jstat: JStat & { jStat?: JStat };
	export default jstat;
}
