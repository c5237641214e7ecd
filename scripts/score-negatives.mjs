// Long form of the test on machines with sound bearings: node scripts/score-negatives.mjs [records of each kind = 2000]
import { spawnSync } from 'node:child_process';
import { fileURLToPath } from 'node:url';

const root = fileURLToPath(new URL('..', import.meta.url));
const { status } = spawnSync(
  process.execPath,
  [
    'node_modules/vitest/vitest.mjs',
    'run',
    'test/measure/evidence-negatives.test.ts',
    '--disable-console-intercept',
  ],
  { cwd: root, stdio: 'inherit', env: { ...process.env, FOREBAY_NEGATIVES: process.argv[2] ?? '2000' } },
);
process.exitCode = status ?? 1;
