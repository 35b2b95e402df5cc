import type { SetupSection } from '$lib/domain/study/finding-place';

export const sectionNames: Record<SetupSection, string> = {
	study: 'Study',
	arms: 'Arms and strata',
	sites: 'Sites',
	visits: 'Visits',
	measures: 'Measures',
	schedule: 'Schedule of activities',
	eligibility: 'Eligibility and consent'
};
