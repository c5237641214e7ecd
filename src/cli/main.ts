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

function notNegative(text: string): number {
  const value = Number(text);
  if (!(Number.isFinite(value) && value >= 0)) throw new InvalidArgumentError('a number from 0 is wanted');
  return value;
}

function wholeNumber(text: string): number {
  const value = Number(text);
  if (!(Number.isSafeInteger(value) && value >= 0))
    throw new InvalidArgumentError('a whole number from 0 is wanted');
  return value;
}

/** The command line is wrong, or names a file that cannot be read. */
const usageCodes: readonly string[] = ['command.usage', 'file.unreadable', 'uplink.url'];

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

interface PullFlags {
  broker: string;
  site: string;
  snapshot?: string;
  point?: string;
  seconds?: number;
  fromS?: number;
  channels?: string;
  out: string;
  force?: boolean;
  username?: string;
  passwordFile?: string;
  caFile?: string;
  certFile?: string;
  keyFile?: string;
  protocol?: '5' | '3.1.1';
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

/** What `replay` and `report` may be told of a recording. */
function withRecordingOptions(command: Command): Command {
  return command
    .option('--full-scale-g <g>', 'what integer full scale is, in g', positive)
    .option('--every <s>', 'start a record so often, in seconds', positive)
    .option('--rate-hz <hz>', 'the true sample rate, instead of the one in the file', positive)
    .option('--first-index <i>', "the node's index of the first sample", wholeNumber)
    .option('--start <time>', 'wall time of the first sample, ISO 8601');
}

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

withRecordingOptions(
  program
    .command('replay')
    .description('runs a recording through the same measuring, finding and alarm code as the agent')
    .argument('<file>', 'a recording: WAV, or a snapshot in FLAC')
    .addOption(stationOption())
    .requiredOption('--points <list>', 'a channel each: MACHINE/POINT, LINK/CHANNEL for a tachometer, or -'),
)
  .option('--json', 'one JSON object a line')
  .action(
    runs(async (file: string, options: Record<string, unknown> & { config: string; points: string }) => {
      const { replayCommand } = await import('./replay.ts');
      return replayCommand(file, options);
    }),
  );

withRecordingOptions(
  program
    .command('report')
    .description('one self-contained page of a recording: waveform, spectra, findings')
    .argument('<file>', 'a snapshot in FLAC, or a WAV recording')
    .option('-c, --config <file>', 'the station file; a snapshot can do without')
    .option('--points <list>', 'a channel each, as in replay; a snapshot says them itself')
    .requiredOption('-o, --out <file>', 'the page to write'),
)
  .option('--journal <file>', 'lines of `forebay journal --json` to show beside it')
  .option('--force', 'write over a file that is there')
  .action(
    runs(async (file: string, options: Record<string, unknown> & { config?: string; out: string }) => {
      const { reportCommand } = await import('./report.ts');
      return reportCommand({ ...options, file, config: options.config ?? null, version });
    }),
  );

program
  .command('pull')
  .description('gets the waveform of an alarm, or a new one, over MQTT; resumes and verifies')
  .requiredOption('--broker <url>', 'mqtt://, mqtts://, ws:// or wss:// with host and port')
  .requiredOption('--site <id>', 'the site of the station')
  .option('--snapshot <id>', 'a snapshot that the station keeps: see the alarm, or ask/snapshots')
  .option('--point <m/p>', 'take one now, at this point')
  .option('--seconds <n>', 'of a point: how much to take; of a snapshot: how much of it', positive)
  .option('--from-s <n>', 'of a snapshot: from where on, in seconds', notNegative)
  .option('--channels <list>', 'of a snapshot: only these, by name or point')
  .requiredOption('-o, --out <file>', 'the FLAC file to write')
  .option('--force', 'write over a file that is there')
  .option('--username <name>')
  .option('--password-file <file>', 'the password alone in a file')
  .option('--ca-file <file>')
  .option('--cert-file <file>')
  .option('--key-file <file>')
  .addOption(new Option('--protocol <version>', 'left out, 5 is tried first').choices(['5', '3.1.1']))
  .action(
    runs(async (options: PullFlags) => {
      const { pullCommand } = await import('./pull.ts');
      return pullCommand({
        broker: options.broker,
        site: options.site,
        snapshot: options.snapshot ?? null,
        point: options.point ?? null,
        seconds: options.seconds ?? null,
        fromS: options.fromS ?? null,
        channels: options.channels?.split(',') ?? null,
        file: options.out,
        force: options.force ?? false,
        username: options.username ?? null,
        passwordFile: options.passwordFile ?? null,
        caFile: options.caFile ?? null,
        certFile: options.certFile ?? null,
        keyFile: options.keyFile ?? null,
        protocol: options.protocol === undefined ? null : options.protocol === '5' ? 5 : 4,
        err: process.stderr,
      });
    }),
  );

program
  .command('export')
  .description('a snapshot for other tools, in physical units')
  .argument('<file>', 'a snapshot in FLAC')
  .addOption(new Option('--to <format>').choices(['wav', 'csv', 'uff']).makeOptionMandatory())
  .requiredOption('-o, --out <file>', 'the file to write')
  .option('--force', 'write over a file that is there')
  .action(
    runs(async (from: string, options: { to: 'wav' | 'csv' | 'uff'; out: string; force?: boolean }) => {
      const { exportCommand } = await import('./export.ts');
      const { to, out: file, force = false } = options;
      return exportCommand({ from, to, file, force, err: process.stderr });
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
      return demoCommand({ seconds: seconds ?? null, out: process.stdout, version });
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
