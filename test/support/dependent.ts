/** A process that ends with the one that started it, however that ends: where `setpriv` (util-linux) is there, by the kernel. */
import { type ChildProcess, type SpawnOptions, spawn } from 'node:child_process';
import { hasTool } from './tools.ts';

const tied = hasTool('setpriv');

export function spawnDependent(
  command: string,
  args: readonly string[],
  options: SpawnOptions,
): ChildProcess {
  const child = tied
    ? spawn('setpriv', ['--pdeathsig', 'KILL', command, ...args], options)
    : spawn(command, args, options);
  const end = () => child.kill('SIGKILL');
  process.once('exit', end);
  child.once('exit', () => process.off('exit', end));
  return child;
}
