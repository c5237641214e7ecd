// The demo from a fresh checkout: installs and builds what is missing or old, then runs `forebay demo`.
import { spawnSync } from 'node:child_process';
import { existsSync, readdirSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { installDependencies } from './install.mjs';

const root = fileURLToPath(new URL('..', import.meta.url));
const main = join(root, 'dist/cli/main.js');

function newest(folder) {
  return readdirSync(folder, { withFileTypes: true }).reduce((latest, entry) => {
    const path = join(folder, entry.name);
    return Math.max(latest, entry.isDirectory() ? newest(path) : statSync(path).mtimeMs);
  }, 0);
}

function isBuilt() {
  return existsSync(main) && statSync(main).mtimeMs >= newest(join(root, 'src'));
}

installDependencies();
if (!isBuilt()) {
  console.log('Building ...');
  const build = spawnSync(process.execPath, [join(root, 'scripts/build.mjs')], { stdio: 'inherit' });
  if (build.status !== 0) {
    console.error('The build failed; the lines above say where. From a clean checkout, `npm ci` mends it.');
    process.exit(build.status ?? 1);
  }
}
// Ctrl-C reaches the demo too; it ends in order, and this waits for it.
process.on('SIGINT', () => {});
const demo = spawnSync(process.execPath, [main, 'demo', ...process.argv.slice(2)], { stdio: 'inherit' });
if (demo.error) console.error(`The demo could not be started: ${demo.error.message}`);
process.exit(demo.status ?? 1);
