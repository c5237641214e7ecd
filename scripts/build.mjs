// Compiles src/ to dist/ and makes the command executable. `--clean` empties dist/ first.
import { execFileSync } from 'node:child_process';
import { chmodSync, rmSync } from 'node:fs';
import { fileURLToPath } from 'node:url';

const root = fileURLToPath(new URL('..', import.meta.url));
if (process.argv.includes('--clean')) rmSync(`${root}dist`, { recursive: true, force: true });
execFileSync(
  process.execPath,
  [`${root}node_modules/typescript/bin/tsc`, '-p', `${root}tsconfig.build.json`],
  {
    stdio: 'inherit',
  },
);
chmodSync(`${root}dist/cli/main.js`, 0o755);
