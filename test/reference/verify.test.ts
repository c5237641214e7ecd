/** `npm run verify` as somebody runs it. */
import { spawnSync } from 'node:child_process';
import { fileURLToPath } from 'node:url';
import { expect, it } from 'vitest';

const script = fileURLToPath(new URL('../../scripts/verify.mjs', import.meta.url));
const verify = (part: string) => {
  const { status, stdout, stderr } = spawnSync(process.execPath, [script, part], { encoding: 'utf8' });
  return { status, stderr, lines: stdout.trim().split('\n') };
};

it('prints one line a check with its figure, source and status, and the count at the end', () => {
  const { status, lines, stderr } = verify('bearing.cwru-6205.bpfo');
  expect(stderr).toBe('');
  expect(status).toBe(0);
  expect(lines).toEqual([
    'ok   bearing.cwru-6205.bpfo: 3.584776 x shaft, expected 3.5848 ± 0.0005 (Case Western Reserve University bearing data center, drive end 6205; seen)',
    expect.stringMatching(/^ok {3}bearing\.cwru-6205\.bpfo-is-n-ftf: /),
    'ok   bearing.cwru-6205.bpfo-and-bpfi-are-n: 9 x shaft, expected 9 ± 1e-12 (kinematics of a rolling bearing (identity); computed)',
    '3 passed, 0 failed',
  ]);
}, 60_000);

it('fails where there is nothing to check', () => {
  const { status, lines } = verify('no-such-check');
  expect(lines).toEqual(['0 passed, 0 failed']);
  expect(status).toBe(1);
}, 60_000);
