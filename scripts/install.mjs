// Installs the project's packages when they are missing or older than the lock file.
import { spawnSync } from 'node:child_process';
import { existsSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';

const root = fileURLToPath(new URL('..', import.meta.url));

export function installDependencies() {
  const [major = 0] = process.versions.node.split('.').map(Number);
  if (major < 20) {
    console.error(`Node.js 20 or newer is needed; this is ${process.version}.`);
    process.exit(1);
  }
  const stamp = join(root, 'node_modules/.package-lock.json');
  const lock = join(root, 'package-lock.json');
  if (existsSync(stamp) && statSync(stamp).mtimeMs >= statSync(lock).mtimeMs) return;
  console.log('Installing packages (the database driver may compile for a minute) ...');
  const install = spawnSync('npm', ['ci'], { cwd: root, stdio: ['ignore', 'inherit', 'inherit'] });
  if (install.status !== 0) {
    console.error(
      'npm ci failed. A C++ compiler, make and python3 are needed where no prebuilt driver is offered.',
    );
    process.exit(install.status ?? 1);
  }
}
