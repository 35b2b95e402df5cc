declare module 's3rver' {
	/** As much of the object store as the tests use. */
	export default class S3rver {
		constructor(options: {
			port: number;
			address: string;
			silent: boolean;
			directory: string;
			configureBuckets: { name: string; configs: string[] }[];
		});
		run(): Promise<unknown>;
		close(): Promise<void>;
	}
}
