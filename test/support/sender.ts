/**
 * A sender of the sensor link, written from the published page of the link alone. It shares no code with src/, so
 * that a misreading of that page does not cancel out.
 */

interface SentChannel {
  name: string;
  unit: 'g' | 'm/s2' | 'logic';
  /** Physical units per count. */
  scale: number;
}

export interface SentNode {
  node: number;
  /** Nominal, as claimed in DESCRIBE. */
  rateHz: number;
  format: 'i16' | 'i24';
  channels: readonly SentChannel[];
  serialNumber: string;
  firmware: string;
}

/** Bitwise, from the definition: reflected polynomial 82F63B78, all ones in and out. */
export function plainCrc32c(bytes: readonly number[]): number {
  let register = 0xffffffff;
  for (const byte of bytes) {
    register ^= byte;
    for (let bit = 0; bit < 8; bit++) {
      const carry = register & 1;
      register >>>= 1;
      if (carry) register ^= 0x82f63b78;
    }
  }
  return (register ^ 0xffffffff) >>> 0;
}

/** COBS without delimiter; `closeFullRun` adds the extra 01 after a last run of exactly 254 bytes. */
export function plainCobs(bytes: ArrayLike<number>, closeFullRun = false): number[] {
  const out: number[] = [];
  let run: number[] = [];
  let open = true;
  for (let i = 0; i < bytes.length; i++) {
    const byte = bytes[i]!;
    open = true;
    if (byte === 0) {
      out.push(run.length + 1, ...run);
      run = [];
      continue;
    }
    run.push(byte);
    if (run.length === 254) {
      out.push(255, ...run);
      run = [];
      open = closeFullRun || i + 1 < bytes.length;
    }
  }
  if (open) out.push(run.length + 1, ...run);
  return out;
}

function little(value: number | bigint, bytes: number): number[] {
  const out: number[] = [];
  let rest = BigInt.asUintN(8 * bytes, BigInt(value));
  for (let i = 0; i < bytes; i++) {
    out.push(Number(rest & 255n));
    rest >>= 8n;
  }
  return out;
}

function float32(value: number): number[] {
  const view = new DataView(new ArrayBuffer(4));
  view.setFloat32(0, value, true);
  return [0, 1, 2, 3].map((i) => view.getUint8(i));
}

function counted(text: string): number[] {
  const bytes = [...new TextEncoder().encode(text)];
  return [bytes.length, ...bytes];
}

/** Makes the frames of one node, counting them as the node does. */
export class NodeFrames {
  counter: number;
  readonly spec: SentNode;

  constructor(spec: SentNode, counter = 0) {
    this.spec = spec;
    this.counter = counter;
  }

  describe(): Uint8Array {
    const { rateHz, format, channels, serialNumber, firmware } = this.spec;
    const unit = { g: 1, 'm/s2': 2, logic: 3 };
    return this.frame(1, [
      ...little(Math.round(rateHz * 1000), 4),
      channels.length,
      format === 'i16' ? 1 : 2,
      ...channels.flatMap((channel) => [
        unit[channel.unit],
        ...float32(channel.scale),
        ...counted(channel.name),
      ]),
      ...counted(serialNumber),
      ...counted(firmware),
    ]);
  }

  /** @param counts interleaved by channel, n × channels of them. */
  samples(firstIndex: number | bigint, counts: ArrayLike<number>): Uint8Array {
    const size = this.spec.format === 'i16' ? 2 : 3;
    const body = [...little(firstIndex, 8), ...little(counts.length / this.spec.channels.length, 2)];
    for (let i = 0; i < counts.length; i++) {
      const count = counts[i]!;
      body.push(count & 255, (count >> 8) & 255);
      if (size === 3) body.push((count >> 16) & 255);
    }
    return this.frame(2, body);
  }

  health(temperatureC: number, supplyV: number, overRange: number, lost: number): Uint8Array {
    return this.frame(3, [
      ...little(Math.round(temperatureC * 100), 2),
      ...little(Math.round(supplyV * 1000), 2),
      ...little(overRange, 4),
      ...little(lost, 4),
    ]);
  }

  /** Any kind with any body, delimiter included. */
  frame(kind: number, body: readonly number[], version = 1): Uint8Array {
    const bytes = [version, kind, ...little(this.spec.node, 2), ...little(this.counter++, 4), ...body];
    return Uint8Array.from([...plainCobs([...bytes, ...little(plainCrc32c(bytes), 4)]), 0]);
  }
}

export interface PaceOptions {
  /** Samples per frame. */
  frameSamples?: number;
  /** The rate that the node really has; left out, the one it claims. */
  trueRateHz?: number;
  /** Counts of one frame, interleaved; left out, small ones that tell index and channel. */
  counts?: (firstIndex: number, n: number) => ArrayLike<number>;
}

const TICK_MS = 5;
const DESCRIBE_MS = 1000;

/** Sends a node's samples at its own pace, by the monotonic clock: never early, and late ones in a burst. */
export class PacedSender {
  readonly frames: NodeFrames;
  nextIndex = 0;
  readonly #write: (bytes: Uint8Array) => void;
  readonly #frameSamples: number;
  readonly #rateHz: number;
  readonly #counts: (firstIndex: number, n: number) => ArrayLike<number>;
  #timer: NodeJS.Timeout | null = null;
  #startedMs = 0;
  #startIndex = 0;
  #describedMs = 0;

  constructor(spec: SentNode, write: (bytes: Uint8Array) => void, options: PaceOptions = {}) {
    this.frames = new NodeFrames(spec);
    this.#write = write;
    this.#frameSamples = options.frameSamples ?? 256;
    this.#rateHz = options.trueRateHz ?? spec.rateHz;
    const channels = spec.channels.length;
    this.#counts =
      options.counts ??
      ((firstIndex, n) =>
        Int32Array.from({ length: n * channels }, (_, k) => countAt(firstIndex, k, channels)));
  }

  start(): void {
    this.stop();
    this.#startedMs = performance.now();
    this.#startIndex = this.nextIndex;
    this.#describe();
    this.#timer = setInterval(() => this.#send(), TICK_MS);
  }

  stop(): void {
    if (this.#timer) clearInterval(this.#timer);
    this.#timer = null;
  }

  /** As after a power cut: counter and index begin at 0 again. */
  restart(): void {
    this.frames.counter = 0;
    this.nextIndex = 0;
    this.start();
  }

  #describe(): void {
    this.#describedMs = performance.now();
    this.#write(this.frames.describe());
  }

  #send(): void {
    const now = performance.now();
    if (now - this.#describedMs > DESCRIBE_MS) this.#describe();
    const due = this.#startIndex + ((now - this.#startedMs) / 1000) * this.#rateHz;
    while (this.nextIndex + this.#frameSamples <= due) {
      const n = this.#frameSamples;
      this.#write(this.frames.samples(this.nextIndex, this.#counts(this.nextIndex, n)));
      this.nextIndex += n;
    }
  }
}

/** What PacedSender sends by default: sample index and channel can be told from the count. */
export function countAt(firstIndex: number, k: number, channels: number): number {
  const index = firstIndex + Math.floor(k / channels);
  return ((index * 7 + (k % channels) * 1000) % 20000) - 10000;
}
