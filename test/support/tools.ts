/** Which optional tools this machine has. A test that needs one runs where it is present; scripts/test.mjs names the others. */
import { spawnSync } from 'node:child_process';
import { existsSync } from 'node:fs';
import { fileURLToPath } from 'node:url';

export function hasTool(command: string): boolean {
  return spawnSync('sh', ['-c', `command -v ${command}`]).status === 0 || existsSync(`/usr/sbin/${command}`);
}

/** Whether Debian's python3 has a module. */
export function hasPython(module: string): boolean {
  return spawnSync('/usr/bin/python3', ['-c', `import ${module}`]).status === 0;
}

/** The library that gives a process a wall clock of its own, or undefined. */
export function faketimeLibrary(): string | undefined {
  return ['/usr/lib/x86_64-linux-gnu', '/usr/lib/aarch64-linux-gnu', '/usr/lib/arm-linux-gnueabihf']
    .map((folder) => `${folder}/faketime/libfaketime.so.1`)
    .find(existsSync);
}

/** The folder of open recordings beside the checkout, or null. */
export function recordingsFolder(): string | null {
  const folder = fileURLToPath(new URL('../../../shared/data', import.meta.url));
  return existsSync(folder) ? folder : null;
}
