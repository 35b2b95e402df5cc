import type { KeptValue } from '$lib/domain/measurement/visit-form';
import { decimalsOfMeasure, type Measure } from '$lib/domain/study/definition';
import { numberText, quantityText } from '$lib/units/convert';
import { isUnit, unitText } from '$lib/units/units';

/** '130.0 mmHg', 'Female', 'not done: Subject declined' */
export function keptText(measure: Measure, kept: KeptValue): string {
	if (kept.notDone) return measure.kind === 'derived' ? kept.notDone : `not done: ${kept.notDone}`;
	if (kept.value !== null && 'unit' in measure)
		return quantityText(kept.value, measure.unit, decimalsOfMeasure(measure));
	if (measure.kind === 'choice')
		return measure.choices.find((choice) => choice.key === kept.text)?.name ?? kept.text ?? '';
	return kept.text ?? '';
}

/** What was typed, where it is not what is shown: readings, another unit. */
export function enteredText(measure: Measure, kept: KeptValue): string | null {
	const unit = kept.enteredUnit;
	const words = unit && isUnit(unit) ? ` ${unitText(unit)}` : '';
	if (measure.kind === 'repeated' && kept.enteredReadings)
		return `readings ${kept.enteredReadings.map((each) => numberText(each, unit === measure.unit ? measure.decimals : decimalsIn(each))).join(', ')}${words}`;
	if (measure.kind === 'number' && unit && unit !== measure.unit && kept.enteredValue !== null)
		return `entered as ${numberText(kept.enteredValue, decimalsIn(kept.enteredValue))}${words}`;
	return null;
}

const decimalsIn = (value: number) => String(value).split('.')[1]?.length ?? 0;
