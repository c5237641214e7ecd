import { type Description, FrameEncoder, mostSamples } from './frames.ts';
import type { SampleSource } from './sensor.ts';
import type { Sink } from './sinks.ts';

export interface NodeSettings {
  readonly node: number;
  readonly serialNumber: string;
  readonly firmware?: string;
  /** Samples of each channel in a frame; about 10 ms of them if left out. */
  readonly frameSamples?: number;
  readonly temperatureC?: number;
  readonly supplyV?: number;
}

/** What a node did so far. */
export interface NodeCounts {
  frames: number;
  /** Handed to the line, and taken by it. */
  bytes: number;
  samples: number;
  /** Bytes that the line had no room for, the frames that they belonged to, and their samples per channel. */
  droppedBytes: number;
  droppedFrames: number;
  lostSamples: number;
}

const describeEveryS = 2;
const healthEveryS = 30;
/** In real time: behind by more, the process slept. */
const mostBehindS = 0.5;
const tickMs = 5;

/**
 * A sensor node that writes sensor-link frames at the pace of its own sample clock. Which samples are due follows
 * from the elapsed time alone, so late or merged timers change nothing but the bunching. Faults are made on demand.
 */
export class SimulatedNode {
  readonly counts: NodeCounts = {
    frames: 0,
    bytes: 0,
    samples: 0,
    droppedBytes: 0,
    droppedFrames: 0,
    lostSamples: 0,
  };
  readonly #source: SampleSource;
  readonly #sink: Sink;
  readonly #settings: NodeSettings;
  readonly #encoder: FrameEncoder;
  readonly #frameSamples: number;
  readonly #portion: Int32Array;
  #serialNumber: string;
  /** Index of the next sample, since the node's own start. */
  #index = 0;
  /** Samples due before this run of the index, so that a restart does not disturb the pace. */
  #indexBase = 0;
  #nextDescribe = 0;
  #nextHealth: number;
  #stalledUntil = 0;
  #corruptFrames = 0;
  #timer: NodeJS.Timeout | null = null;

  constructor(settings: NodeSettings, source: SampleSource, sink: Sink) {
    const most = mostSamples(source.channels.length, source.bits);
    const frameSamples = settings.frameSamples ?? Math.min(most, Math.round(source.rateHz / 100));
    if (!(Number.isInteger(frameSamples) && frameSamples >= 1 && frameSamples <= most)) {
      throw new RangeError(`node: ${frameSamples} samples do not make a frame; 1 to ${most} do`);
    }
    this.#settings = settings;
    this.#source = source;
    this.#sink = sink;
    this.#encoder = new FrameEncoder(settings.node);
    this.#frameSamples = frameSamples;
    this.#portion = new Int32Array(frameSamples * source.channels.length);
    this.#serialNumber = settings.serialNumber;
    this.#nextHealth = this.#samplesIn(healthEveryS);
  }

  /** Runs in real time until `stop()`. */
  start(): void {
    if (this.#timer !== null) return;
    const began = performance.now() - (this.#sent * 1000) / this.#source.rateHz;
    this.#timer = setInterval(() => this.advanceTo((performance.now() - began) / 1000, mostBehindS), tickMs);
  }

  stop(): void {
    if (this.#timer !== null) clearInterval(this.#timer);
    this.#timer = null;
  }

  /**
   * Sends every whole frame that is due by `elapsedS` after the start. A node that is further behind than
   * `mostBehindSeconds` does not send what its converter could not have kept: its index jumps to what is due.
   */
  advanceTo(elapsedS: number, mostBehindSeconds = Number.POSITIVE_INFINITY): void {
    const due = Math.floor(elapsedS * this.#source.rateHz);
    const behind = due - this.#sent;
    if (behind > mostBehindSeconds * this.#source.rateHz) this.#skip(behind - (behind % this.#frameSamples));
    while (this.#sent + this.#frameSamples <= due) this.#sendPortion();
  }

  /** Sends nothing for a while though the converter goes on: the index jumps. */
  stallFor(seconds: number): void {
    this.#stalledUntil = this.#sent + this.#samplesIn(seconds);
  }

  /** One byte of each of the next frames arrives wrong. */
  corrupt(frames: number): void {
    this.#corruptFrames = frames;
  }

  /** Bytes of another kind on the line, as from a loose plug. */
  babble(bytes: Uint8Array): void {
    this.#write(bytes);
  }

  /** As after a loss of supply: index and frame counter begin again. */
  restart(): void {
    this.#indexBase += this.#index;
    this.#nextDescribe = 0;
    this.#nextHealth = this.#samplesIn(healthEveryS);
    this.#index = 0;
    this.#encoder.restart();
  }

  /** Another node at the same cable: it tells its own serial number and starts from 0. */
  exchange(serialNumber: string): void {
    this.#serialNumber = serialNumber;
    this.restart();
  }

  /** Samples since the start, those of earlier runs of the index included. */
  get #sent(): number {
    return this.#indexBase + this.#index;
  }

  #samplesIn(seconds: number): number {
    return Math.round(seconds * this.#source.rateHz);
  }

  #skip(samples: number): void {
    this.#index += samples;
    this.counts.lostSamples += samples;
  }

  #sendPortion(): void {
    this.#source.fill(this.#portion, this.#frameSamples);
    if (this.#sent < this.#stalledUntil) {
      this.#skip(this.#frameSamples);
      return;
    }
    if (this.#index >= this.#nextDescribe) {
      this.#sendFrame(this.#encoder.describe(this.#description()), 0);
      this.#nextDescribe = this.#index + this.#samplesIn(describeEveryS);
    }
    const frame = this.#encoder.samples(this.#index, this.#portion, this.#frameSamples, this.#source.bits);
    this.#sendFrame(frame, this.#frameSamples);
    this.#index += this.#frameSamples;
    this.counts.samples += this.#frameSamples;
    if (this.#index >= this.#nextHealth) {
      const { temperatureC = 31.5, supplyV = 5 } = this.#settings;
      const { lostSamples } = this.counts;
      const health = { temperatureC, supplyV, overRange: this.#source.overRange, lost: lostSamples };
      this.#sendFrame(this.#encoder.health(health), 0);
      this.#nextHealth = this.#index + this.#samplesIn(healthEveryS);
    }
  }

  #description(): Description {
    const { nominalRateHz, bits, channels } = this.#source;
    const firmware = this.#settings.firmware ?? 'simulated';
    return { nominalRateHz, bits, channels, serialNumber: this.#serialNumber, firmware };
  }

  #sendFrame(frame: Uint8Array, samples: number): void {
    if (this.#corruptFrames > 0) {
      this.#corruptFrames--;
      // Never to or from a zero: the frame stays one frame.
      const at = frame.length >> 1;
      frame[at] = frame[at] === 0x55 ? 0x56 : 0x55;
    }
    this.counts.frames++;
    if (this.#write(frame) > 0) {
      this.counts.droppedFrames++;
      this.counts.lostSamples += samples;
    }
  }

  /** What did not go is gone: a UART has nowhere to keep it. Returns the bytes dropped. */
  #write(bytes: Uint8Array): number {
    const taken = this.#sink(bytes);
    this.counts.bytes += taken;
    this.counts.droppedBytes += bytes.length - taken;
    return bytes.length - taken;
  }
}
