export type SummaryRule = 'mean' | 'mean-without-first' | 'median' | 'last';

/** One number for several readings, unrounded. A first reading that is to be left out stands when it is the only one. */
export function summarise(readings: readonly number[], rule: SummaryRule): number {
	if (readings.length === 0) throw new RangeError('There is no reading to summarise');
	switch (rule) {
		case 'mean':
			return mean(readings);
		case 'mean-without-first':
			return readings.length === 1 ? mean(readings) : mean(readings.slice(1));
		case 'median': {
			const sorted = [...readings].sort((a, b) => a - b);
			const middle = Math.floor(sorted.length / 2);
			return sorted.length % 2 === 1
				? (sorted[middle] as number)
				: mean(sorted.slice(middle - 1, middle + 1));
		}
		case 'last':
			return readings.at(-1) as number;
	}
}

const mean = (values: readonly number[]): number =>
	values.reduce((total, value) => total + value, 0) / values.length;
