import { Eta } from 'eta';

const files = import.meta.glob<string>('../../../../templates/mail/*.eta', {
	query: '?raw',
	import: 'default',
	eager: true
});
// Plain text: there is nothing to escape in it.
const eta = new Eta({ autoEscape: false, autoTrim: false });
for (const [path, text] of Object.entries(files))
	eta.loadTemplate(
		`@${path
			.split('/')
			.pop()
			?.replace(/\.eta$/, '')}`,
		text
	);

/** Subject and text of a mail: the template's first line is the subject. A value can add no line to it. */
export function renderMail(
	name: string,
	values: Record<string, string>
): { subject: string; text: string } {
	const inLine = Object.fromEntries(
		// eslint-disable-next-line no-control-regex
		Object.entries(values).map(([key, value]) => [
			key,
			value.replace(/[\u0000-\u001f\u007f]+/g, ' ')
		])
	);
	const [subject = '', ...rest] = eta.render(`@${name}`, inLine).split('\n');
	return { subject: subject.trim(), text: rest.join('\n').trim() + '\n' };
}
