#!/usr/bin/env node
/** The `forebay` command. Exit status: 0 done, 1 failed while running, 2 the command line or the configuration is wrong. */

import { readFileSync } from 'node:fs';
import { Command, CommanderError, InvalidArgumentError, Option } from 'commander';
import { ForebayError } from '../config/errors.ts';
import { ConfigError } from '../config/load.ts';

const version = (
  JSON.parse(readFileSync(new URL('../../package.json', import.meta.url), 'utf8')) as { version: string }
).version;

function positive(text: string): number {
  const value = Number(text);
  if (!(Number.isFinite(value) && value > 0)) throw new InvalidArgumentError('a number above 0 is wanted');
  return value;
}

function wholeNumber(text: string): number {
  const value = Number(text);
  if (!(Number.isSafeInteger(value) && value >= 0))
    throw new InvalidArgumentError('a whole number from 0 is wanted');
  return value;
}

/** The command line is wrong, or names a file that cannot be read. */
const usageCodes: readonly string[] = ['command.usage', 'file.unreadable'];

/** Says what went wrong on standard error and gives the exit status. */
function failure(error: unknown): number {
  if (error instanceof ConfigError) {
    process.stderr.write(`${error.message}\n`);
    return 2;
  }
  if (error instanceof ForebayError) {
    process.stderr.write(`forebay: ${error.message}\n  ${error.fix} (${error.code})\n`);
    return usageCodes.includes(error.code) || error.code.startsWith('config.') ? 2 : 1;
  }
  process.stderr.write(
    `forebay: ${error instanceof Error ? (error.stack ?? error.message) : String(error)}\n`,
  );
  return 1;
}

/** Runs the action and leaves its exit status; each command's modules load only when it is called. */
function runs<Args extends unknown[]>(action: (...args: Args) => Promise<number>) {
  return async (...args: Args): Promise<void> => {
    try {
      process.exitCode = await action(...args);
    } catch (error) {
      process.exitCode = failure(error);
    }
  };
}

const program = new Command('forebay');
program
  .description(
    'Measures the vibration of pumps at an unattended station and says what it finds over MQTT.\n' +
      'It advises: it is not a machine protection system, and no trip may depend on it.',
  )
  .version(version)
  .exitOverride()
  .showHelpAfterError('(forebay help shows the commands)');

const stationOption = () => new Option('-c, --config <file>', 'the station file').makeOptionMandatory();

program
  .command('run')
  .description('the agent, until SIGTERM')
  .addOption(stationOption())
  .action(
    runs(async ({ config }: { config: string }) => {
      const { runCommand } = await import('./run.ts');
      return runCommand({ config, version });
    }),
  );

program
  .command('check')
  .description('validates the station file and prints what follows from it')
  .addOption(stationOption())
  .option('--json', 'one JSON object a line')
  .action(
    runs(async ({ config, json }: { config: string; json?: boolean }) => {
      const { checkCommand } = await import('./check.ts');
      return checkCommand({ config, json: json ?? false, out: process.stdout, err: process.stderr });
    }),
  );

program
  .command('listen')
  .description('live figures of each channel, for whoever stands at the machine; advice only')
  .addOption(stationOption())
  .option('--seconds <n>', 'stop after so many seconds', positive)
  .action(
    runs(async ({ config, seconds }: { config: string; seconds?: number }) => {
      const { listenCommand } = await import('./listen.ts');
      return listenCommand({ config, seconds: seconds ?? null, out: process.stdout });
    }),
  );

program
  .command('learn')
  .description('learns the baseline of each point from good readings of the running agent')
  .addOption(stationOption())
  .option('--hours <n>', 'how long the agent collects readings; 24 unless given', positive)
  .option('--no-accept', 'leave what was learned as a proposal, for ask/baseline to accept or reject')
  .action(
    runs(async ({ config, hours, accept }: { config: string; hours?: number; accept: boolean }) => {
      const { learnCommand } = await import('./learn.ts');
      const [out, err] = [process.stdout, process.stderr];
      return learnCommand({ config, hours: hours ?? null, accept, out, err });
    }),
  );

program
  .command('replay')
  .description('runs a recording through the same measuring, finding and alarm code as the agent')
  .argument('<file>', 'a WAV recording')
  .addOption(stationOption())
  .requiredOption('--points <list>', 'a channel each: MACHINE/POINT, LINK/CHANNEL for a tachometer, or -')
  .option('--full-scale-g <g>', 'what integer full scale is, in g', positive)
  .option('--every <s>', 'start a record so often, in seconds', positive)
  .option('--rate-hz <hz>', 'the true sample rate, instead of the one in the file', positive)
  .option('--first-index <i>', "the node's index of the first sample", wholeNumber)
  .option('--start <time>', 'wall time of the first sample, ISO 8601')
  .option('--json', 'one JSON object a line')
  .action(
    runs(async (file: string, options: Record<string, unknown> & { config: string; points: string }) => {
      const { replayCommand } = await import('./replay.ts');
      return replayCommand(file, options);
    }),
  );

program
  .command('journal')
  .description('the alarm journal kept on the gateway')
  .addOption(stationOption())
  .option('--since <time>', 'from this time on, ISO 8601')
  .option('--json', 'one JSON object a line')
  .action(
    runs(async ({ config, since, json }: { config: string; since?: string; json?: boolean }) => {
      const { journalCommand } = await import('./journal.ts');
      return journalCommand({ config, since: since ?? null, json: json ?? false, out: process.stdout });
    }),
  );

program
  .command('demo')
  .description(
    'a simulated station over pseudo-terminals, the embedded broker and the agent, in one terminal',
  )
  .option('--seconds <n>', 'how long it runs', positive)
  .action(
    runs(async ({ seconds }: { seconds?: number }) => {
      const { demoCommand } = await import('./demo.ts');
      return demoCommand({ seconds: seconds ?? null, out: process.stdout });
    }),
  );

program
  .command('schema')
  .description('the JSON Schema of the station file, for editors')
  .action(
    runs(async () => {
      const { schemaText } = await import('./schema.ts');
      process.stdout.write(schemaText());
      return 0;
    }),
  );

// A reader that goes away (`| head`) ends the command quietly.
process.stdout.on('error', (error: NodeJS.ErrnoException) => {
  if (error.code === 'EPIPE') process.exit(0);
  throw error;
});

try {
  await program.parseAsync();
} catch (error) {
  if (!(error instanceof CommanderError)) throw error;
  process.exitCode = error.exitCode === 0 ? 0 : 2;
}
