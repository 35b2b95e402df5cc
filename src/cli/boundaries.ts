import { boundariesCommand } from '$lib/command-line/boundaries-command';
import { say } from '$lib/command-line/plan-file';

say(await boundariesCommand(process.argv.slice(2)));
