/**
 * A pseudo-terminal as a stand-in for a serial device: no root, no relay process, nothing to install. The master
 * side is written here; whoever opens `path` sees a serial device.
 *
 * Node can open /dev/ptmx but has no ioctl, so perl (Essential in Debian) or python3 runs once with the descriptor
 * inherited: it unlocks the other side (TIOCSPTLCK) and asks for its number (TIOCGPTN). Linux only.
 */

import { execFile, spawn } from 'node:child_process';
import { closeSync, constants, openSync, writeSync } from 'node:fs';
import { promisify } from 'node:util';

const PERL = `open(my $m, '+<&=', 3) or die "fd: $!";
my $zero = pack('i', 0); ioctl($m, 0x40045431, $zero) or die "unlock: $!";
my $n = pack('I', 0); ioctl($m, 0x80045430, $n) or die "number: $!";
print unpack('I', $n);`;
const PYTHON = `import fcntl, struct
fcntl.ioctl(3, 0x40045431, struct.pack('i', 0))
print(struct.unpack('I', fcntl.ioctl(3, 0x80045430, struct.pack('I', 0)))[0])`;

export class Pty {
  /** The device to open. */
  readonly path: string;
  /** Bytes that found no room: nobody reads, or too slowly. A real UART loses them likewise. */
  droppedBytes = 0;
  #master: number | null;

  constructor(path: string, master: number) {
    this.path = path;
    this.#master = master;
  }

  /** Writes what there is room for (some 20 kB unread) and drops the rest. */
  write(bytes: Uint8Array): void {
    this.droppedBytes += bytes.length - this.offer(bytes);
  }

  /** Writes what there is room for, and returns how many bytes that were; none once closed. */
  offer(bytes: Uint8Array): number {
    let from = 0;
    while (this.#master !== null && from < bytes.length) {
      try {
        from += writeSync(this.#master, bytes, from);
      } catch (error) {
        if ((error as NodeJS.ErrnoException).code !== 'EAGAIN') throw error;
        break;
      }
    }
    return from;
  }

  /** Hangs up: to the reader an unplugged device. */
  close(): void {
    if (this.#master !== null) closeSync(this.#master);
    this.#master = null;
  }
}

/** Opens a pseudo-terminal, raw and without echo. @throws Error where this machine cannot. */
export async function openPty(): Promise<Pty> {
  const master = openSync('/dev/ptmx', constants.O_RDWR | constants.O_NOCTTY | constants.O_NONBLOCK);
  try {
    const number = await runWith(master, 'perl', ['-e', PERL]).catch(() =>
      runWith(master, 'python3', ['-c', PYTHON]),
    );
    const path = `/dev/pts/${number}`;
    await promisify(execFile)('stty', ['-F', path, 'raw', '-echo']);
    return new Pty(path, master);
  } catch (error) {
    closeSync(master);
    throw new Error('no pseudo-terminal: this needs Linux, stty, and perl or python3', { cause: error });
  }
}

/** What the command prints: a number. */
function runWith(descriptor: number, command: string, args: readonly string[]): Promise<number> {
  return new Promise((resolve, reject) => {
    const child = spawn(command, args, { stdio: ['ignore', 'pipe', 'ignore', descriptor] });
    let output = '';
    child.stdout?.on('data', (chunk) => {
      output += String(chunk);
    });
    child.on('error', reject);
    child.on('close', (status) => {
      const number = Number.parseInt(output, 10);
      if (status === 0 && Number.isInteger(number)) resolve(number);
      else reject(new Error(`${command} ended with ${status}`));
    });
  });
}
