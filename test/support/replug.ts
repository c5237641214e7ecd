/** A serial device that can be pulled and plugged in again under the same name, with a sensor node behind it. */
import { rmSync, symlinkSync } from 'node:fs';
import { openPty, type Pty } from '../../src/simulate/pty.ts';
import { PacedSender, type PaceOptions, type SentNode } from './sender.ts';

export class Cable {
  readonly device: string;
  #pty: Pty | null = null;
  /** The node is there and says nothing. */
  muted = false;
  /** What is written is held back for so long, and comes in one piece. */
  holdMs = 0;
  #held: Uint8Array[] = [];
  #release: NodeJS.Timeout | null = null;
  /** Where the other end of the cable is. */
  #to: Cable = this;
  /** What the node writes while nobody is plugged in is gone. */
  readonly write = (bytes: Uint8Array): void => {
    if (this.muted) return;
    if (this.holdMs === 0 && this.#held.length === 0) this.#to.#pty?.write(bytes);
    else {
      this.#held.push(bytes.slice());
      this.#release ??= setTimeout(() => this.#letGo(), this.holdMs);
    }
  };

  constructor(device: string) {
    this.device = device;
  }

  async plug(): Promise<void> {
    this.#pty = await openPty();
    symlinkSync(this.#pty.path, this.device);
  }

  /** The two nodes are plugged in at each other's device; undone by what is returned. */
  swapWith(other: Cable): () => void {
    this.#to = other;
    other.#to = this;
    return () => {
      this.#to = this;
      other.#to = other;
    };
  }

  #letGo(): void {
    this.#release = null;
    for (const bytes of this.#held.splice(0)) this.#to.#pty?.write(bytes);
  }

  unplug(): void {
    rmSync(this.device, { force: true });
    this.#pty?.close();
    this.#pty = null;
  }
}

const rateHz = 4096;
const period = rateHz * 20;

/**
 * Counts of `channels` channels with 1 g at 4096: a tone of 64 Hz whose amplitude goes up and down between 2 and
 * 9 mm/s within 20 s, each channel a share of that later. Velocity of a tone: a / (2πf).
 */
function tones(channels: number): (firstIndex: number, n: number) => Int16Array {
  const cycle = rateHz / 64;
  const sine = Float64Array.from({ length: cycle }, (_, i) => Math.sin((2 * Math.PI * i) / cycle));
  // RMS mm/s to peak g: × √2 × 2πf / 9806.65.
  const gPerMmS = (Math.SQRT2 * 2 * Math.PI * 64) / 9806.65;
  return (firstIndex, n) => {
    const counts = new Int16Array(n * channels);
    for (let c = 0; c < channels; c++) {
      const phase = ((firstIndex + (c * period) / channels) % period) / period;
      const mmS = 2 + 7 * (phase < 0.5 ? 2 * phase : 2 - 2 * phase);
      const peak = mmS * gPerMmS * 4096;
      for (let i = 0; i < n; i++)
        counts[i * channels + c] = Math.round(peak * sine[(firstIndex + i) % cycle]!);
    }
    return counts;
  };
}

export const nodeRateHz = rateHz;

export function pacedNode(
  node: number,
  serialNumber: string,
  cable: Cable,
  options: PaceOptions = {},
): PacedSender {
  const spec: SentNode = {
    node,
    rateHz,
    format: 'i16',
    channels: ['x', 'y'].map((name) => ({ name, unit: 'g' as const, scale: 1 / 4096 })),
    serialNumber,
    firmware: '1',
  };
  return new PacedSender(spec, cable.write, { frameSamples: 64, counts: tones(2), ...options });
}
