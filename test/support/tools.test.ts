/** Where the continuous integration runs, nothing may be left out for want of a tool. */
import { expect, it } from 'vitest';
import { faketimeLibrary, hasPython, hasTool, recordingsFolder } from './tools.ts';

const commands = [
  'socat',
  'mosquitto',
  'mosquitto_sub',
  'openssl',
  'perl',
  'systemd-notify',
  'flac',
  'metaflac',
  'chromium',
  'gfortran',
];
const missing = commands.filter((tool) => !hasTool(tool));
for (const module of ['scipy', 'soundfile']) if (!hasPython(module)) missing.push(`python3-${module}`);
if (faketimeLibrary() === undefined) missing.push('libfaketime');
if (missing.length > 0) console.log(`NOT TESTED: what needs ${missing.join(', ')}`);
if (recordingsFolder() === null)
  console.log('NOT TESTED: the open recordings, which are not beside the checkout');

it.runIf(process.env.CI)('every tool that a test needs is there in continuous integration', () => {
  expect(missing).toEqual([]);
});
