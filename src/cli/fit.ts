import { fitCommand } from '$lib/command-line/fit-command';

const { status, output, complaint } = fitCommand(process.argv.slice(2));
process.stderr.write(complaint);
process.stdout.write(output);
process.exitCode = status;
