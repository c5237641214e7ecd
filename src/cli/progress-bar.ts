/** How far a transfer is: a bar that is drawn over itself on a terminal, a line now and then elsewhere. */

export interface ProgressOutput {
  write(text: string): unknown;
  isTTY?: boolean;
}

const WIDTH = 24;
const WINDOW_S = 20;
const TERMINAL_EVERY_S = 0.2;
const LINE_EVERY_S = 10;

export class ProgressBar {
  readonly #out: ProgressOutput;
  readonly #seconds: () => number;
  /** Bytes at times of the last while, for the rate. */
  readonly #marks: { s: number; bytes: number }[] = [];
  #drawnS = Number.NEGATIVE_INFINITY;

  constructor(out: ProgressOutput, seconds: () => number = () => performance.now() / 1000) {
    this.#out = out;
    this.#seconds = seconds;
  }

  /** @param bytes that are here, of `all`. */
  show(bytes: number, all: number): void {
    const s = this.#seconds();
    this.#marks.push({ s, bytes });
    while (this.#marks.length > 2 && s - this.#marks[0]!.s > WINDOW_S) this.#marks.shift();
    const terminal = this.#out.isTTY === true;
    if (s - this.#drawnS < (terminal ? TERMINAL_EVERY_S : LINE_EVERY_S) && bytes < all) return;
    this.#drawnS = s;
    const line = progressText(bytes, all, this.#rate());
    this.#out.write(terminal ? `\r${line.padEnd(78)}` : `${line}\n`);
  }

  /** Leaves the line of the bar. */
  end(): void {
    if (this.#out.isTTY === true && this.#drawnS > 0) this.#out.write('\n');
  }

  /** Bytes per second; null: nobody knows yet. */
  #rate(): number | null {
    const [first, last] = [this.#marks[0], this.#marks.at(-1)];
    if (!first || !last || last.s - first.s < 0.5 || last.bytes <= first.bytes) return null;
    return (last.bytes - first.bytes) / (last.s - first.s);
  }
}

function progressText(bytes: number, all: number, bytesPerS: number | null): string {
  const share = all > 0 ? bytes / all : 1;
  const filled = Math.round(share * WIDTH);
  const bar = `[${'#'.repeat(filled)}${'.'.repeat(WIDTH - filled)}]`;
  const parts = [`${bar} ${Math.floor(share * 100)} %`, `${size(bytes)} of ${size(all)}`];
  if (bytesPerS !== null) {
    parts.push(`${size(bytesPerS)}/s`);
    if (bytes < all) parts.push(`${time((all - bytes) / bytesPerS)} left`);
  }
  return parts.join('  ');
}

function size(bytes: number): string {
  if (bytes < 1000) return `${Math.round(bytes)} B`;
  return bytes < 1e6 ? `${(bytes / 1000).toFixed(1)} kB` : `${(bytes / 1e6).toFixed(2)} MB`;
}

function time(seconds: number): string {
  const whole = Math.ceil(seconds);
  if (whole < 60) return `${whole} s`;
  const minutes = Math.floor(whole / 60);
  return minutes < 60
    ? `${minutes} min ${whole % 60} s`
    : `${Math.floor(minutes / 60)} h ${minutes % 60} min`;
}
