import { designCommand } from '$lib/command-line/design-command';
import { say } from '$lib/command-line/plan-file';

say(await designCommand(process.argv.slice(2)));
