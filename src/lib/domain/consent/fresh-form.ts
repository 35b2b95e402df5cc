import { clock } from '$lib/time/clock';
import { timeInZone } from '$lib/time/zones';
import type { ConsentChoices } from './consent.reads.server';

/** A consent form as it is opened: the newest form in force, now by the site's clocks; what must be said is left open. */
export function freshConsent(
	choices: ConsentChoices,
	forms: readonly string[],
	site: { zone: string; today: string },
	explainer: string | undefined
) {
	const now = timeInZone(clock.now(), site.zone);
	const inForce = choices.consentVersions.find((version) => forms.includes(version.form));
	return {
		consentVersionId: (inForce ?? choices.consentVersions[0])?.id ?? '',
		signedOn: site.today,
		signedTime: now,
		explainedBy: explainer ?? '',
		obtainedOn: site.today,
		obtainedTime: now,
		signedBy: '',
		relationship: '',
		witnessed: false,
		minor: false,
		assent: '',
		assentReason: '',
		copyGiven: false
	};
}
