/** Where the continuous integration runs, nothing may be left out for want of a tool. */
import { describe, expect, it } from 'vitest';
import { faketimeLibrary, hasScipy, hasTool, recordingsFolder } from '../support/tools.ts';

const needed = ['socat', 'mosquitto', 'mosquitto_sub', 'openssl', 'perl', 'systemd-notify'];

describe('the tools that some tests need', () => {
  it('are all present in continuous integration, and named elsewhere', () => {
    const missing = needed.filter((tool) => !hasTool(tool));
    if (!hasScipy()) missing.push('python3-scipy');
    if (faketimeLibrary() === undefined) missing.push('libfaketime');
    if (missing.length > 0) console.log(`not here, so their tests do not run: ${missing.join(', ')}`);
    if (recordingsFolder() === null)
      console.log('the open recordings are not here, so the tests on them do not run');
    if (process.env.CI) expect(missing).toEqual([]);
    else expect(needed.length).toBeGreaterThan(0);
  });
});
