/**
 * One link of the station: from bytes to counts in a ring, kept alive, judged and counted. Everything here runs on
 * the thread that reads, so it does no more than move bytes and count; it tells its host of new samples once a
 * piece received.
 */

import type { LinkSettings } from '../config/station.ts';
import { Deframer } from './cobs.ts';
import { ColumnStream } from './column-stream.ts';
import { describeColumns, type NodeDescription } from './description.ts';
import { decodeFrame } from './frames.ts';
import type { LinkCondition, LinkHealth } from './link-health.ts';
import { type EpochCause, NodeStream } from './node-stream.ts';
import { countAtLimits } from './over-range.ts';
import { type RateEstimate, RateEstimator } from './rate-estimate.ts';
import { RingWriter, ringBytes } from './ring.ts';
import { SerialTransport } from './serial-transport.ts';
import { type Clock, SILENT_AFTER_MS, Supervisor, type SupervisorState } from './supervisor.ts';
import { TcpTransport } from './tcp-transport.ts';
import type { Transport } from './transport.ts';

const TICK_MS = 500;
/** Bytes per second are averaged over so many ticks. */
const SPEED_TICKS = 10;
/** Longer than two DESCRIBEs are apart: on a shared line just opened, the right node may speak second. */
const FOREIGN_AFTER_MS = 2500;
/** So long may another node speak in place of the one listened to before it is judged: that one unheard, a DESCRIBE. */
const JUDGED_WITHIN_MS = 10_000;
/** Bytes older than this say nothing of what a line carries now: it may have fallen silent. */
const LATELY_MS = 1000;
/** Bytes that are no frames for this long: open the port anew, another program may have changed its settings. */
const REOPEN_AFTER_MS = 10_000;

export interface EpochStart {
  readonly epoch: number;
  /** Index of its first sample. */
  readonly firstIndex: number;
  readonly description: NodeDescription;
  /** Memory of the ring, for a RingReader in any thread. */
  readonly memory: SharedArrayBuffer;
  readonly because: EpochCause;
}

export interface LinkHost extends Clock {
  onEpoch(start: EpochStart): void;
  /** There are samples up to (not including) `head`. */
  onSamples(news: { readonly epoch: number; readonly head: number }): void;
  onCondition(condition: LinkCondition): void;
}

export interface LinkOptions {
  /** Seconds, at the nominal rate, that can be read back at any time. */
  readonly ringSeconds: number;
  readonly maxRingBytes: number;
}

/** What the bytes of a format become. */
interface Decoder {
  push(chunk: Uint8Array): void;
  reopened(): void;
  frames(): number;
  errors(): Record<string, number>;
}

export class Link {
  readonly id: string;
  readonly #settings: LinkSettings;
  readonly #options: LinkOptions;
  readonly #host: LinkHost;
  readonly #supervisor: Supervisor;
  readonly #decoder: Decoder;
  #node: NodeStream | null = null;
  #ring: RingWriter | null = null;
  #ringSamples = 0;
  #rate: RateEstimator | null = null;
  #description: NodeDescription | null = null;
  #condition: LinkCondition;
  #epoch = 0;
  #tooLarge: string | null = null;
  #gaps = 0;
  #missingSamples = 0;
  #overRange = new Map<string, number>();
  #bytes = 0;
  readonly #bytesAtTick: { ms: number; bytes: number }[] = [];
  #openedMs = 0;
  #lastBytesMs = Number.NEGATIVE_INFINITY;
  #lastFrameMs = 0;
  #lastFrames = 0;
  #lastSamplesMs = Number.NEGATIVE_INFINITY;
  #samplesCame = false;
  #cancelTick: () => void = () => undefined;

  /** @param makeTransport left out, the one that the settings name. */
  constructor(settings: LinkSettings, options: LinkOptions, host: LinkHost, makeTransport?: () => Transport) {
    this.id = settings.id;
    this.#settings = settings;
    this.#options = options;
    this.#host = host;
    this.#condition = { kind: 'stopped', why: '', sinceMs: host.now() };
    this.#decoder = settings.format.kind === 'frames' ? this.#frameDecoder() : this.#columnDecoder();
    this.#supervisor = new Supervisor(makeTransport ?? (() => transportOf(settings)), host, {
      onBytes: (chunk) => this.#bytesCame(chunk),
      onOpened: () => {
        this.#openedMs = host.now();
        this.#lastFrameMs = this.#openedMs;
        this.#decoder.reopened();
      },
      onState: () => this.#judge(),
    });
  }

  get condition(): LinkCondition {
    return this.#condition;
  }

  /** The rate to measure with; null before any sample. */
  get rate(): RateEstimate | null {
    return this.#rate?.estimate ?? null;
  }

  start(): void {
    this.#cancelTick();
    this.#tick();
    this.#supervisor.start();
  }

  async stop(): Promise<void> {
    this.#cancelTick();
    await this.#supervisor.stop();
  }

  health(): LinkHealth {
    const { opened, refused, silent, unplugged } = this.#supervisor.counts;
    const standing = this.#node?.standing;
    const described = standing && standing.kind !== 'undescribed' ? standing.description : null;
    const first = this.#bytesAtTick[0];
    const elapsedS = first ? (this.#host.now() - first.ms) / 1000 : 0;
    return {
      condition: this.#condition,
      bytesPerS: first && elapsedS > 0 ? (this.#bytes - first.bytes) / elapsedS : 0,
      bytes: this.#bytes,
      frames: this.#decoder.frames(),
      errors: { ...this.#decoder.errors(), 'gaps-joined': this.#ring?.gapsJoined ?? 0 },
      node: this.#node ? described : this.#description,
      nodeHealth: this.#node?.health ?? null,
      otherNodes: this.#node?.otherNodes ?? [],
      rate: this.rate,
      measuredRate: this.#rate?.measured ?? null,
      epoch: this.#epoch,
      head: this.#ring?.head ?? 0,
      gaps: this.#gaps,
      missingSamples: this.#missingSamples,
      restarts: this.#node?.restarts ?? 0,
      overRange: Object.fromEntries(this.#overRange),
      opened,
      refused,
      silent,
      unplugged,
    };
  }

  #frameDecoder(): Decoder {
    const { format } = this.#settings;
    if (format.kind !== 'frames') throw new TypeError('link: not a format of frames');
    const node = new NodeStream(format.expect, {
      onEpoch: (description, firstIndex, because) => this.#beginEpoch(description, firstIndex, because),
      onGap: (n) => this.#gap(n),
      onSamples: (planar, stride, n) => this.#samples(planar, stride, n),
    });
    this.#node = node;
    const errors: Record<string, number> = {};
    let frames = 0;
    const deframer = new Deframer((bytes) => {
      const frame = decodeFrame(bytes);
      if (frame.kind === 'error') errors[frame.cause] = (errors[frame.cause] ?? 0) + 1;
      else {
        frames++;
        node.accept(frame, this.#host.now());
      }
    });
    return {
      push: (chunk) => deframer.push(chunk),
      reopened: () => {
        deframer.reset();
        node.reopened();
      },
      frames: () => frames,
      errors: () => ({ ...deframer.errors, ...errors, ...node.errors }),
    };
  }

  #columnDecoder(): Decoder {
    const { format } = this.#settings;
    if (format.kind !== 'columns') throw new TypeError('link: not a format of columns');
    const description = describeColumns(format.sampleRateHz, format.channels);
    const stream = new ColumnStream(format.channels, {
      onEpoch: (firstIndex, because) => this.#beginEpoch(description, firstIndex, because),
      onGap: (n) => this.#gap(n),
      onSamples: (planar, stride, n) => this.#samples(planar, stride, n),
    });
    return {
      push: (chunk) => stream.push(chunk),
      reopened: () => stream.reopened(),
      frames: () => stream.rowsTaken,
      errors: () => ({ ...stream.errors }),
    };
  }

  #bytesCame(chunk: Uint8Array): void {
    this.#bytes += chunk.length;
    this.#samplesCame = false;
    const now = this.#host.now();
    this.#lastBytesMs = now;
    this.#decoder.push(chunk);
    const frames = this.#decoder.frames();
    if (frames !== this.#lastFrames) {
      this.#lastFrames = frames;
      this.#lastFrameMs = now;
    }
    if (!this.#samplesCame || !this.#ring) return;
    this.#lastSamplesMs = now;
    const { head } = this.#ring;
    // The newest sample of a piece is the least delayed one.
    this.#rate?.observe(head, now);
    if (this.#condition.kind !== 'receiving') this.#judge();
    this.#host.onSamples({ epoch: this.#epoch, head });
  }

  #beginEpoch(description: NodeDescription, firstIndex: number, because: EpochCause): void {
    const channels = description.channels.length;
    const samples = Math.max(1, Math.ceil(this.#options.ringSeconds * description.nominalRateHz));
    const bytes = ringBytes(channels, samples);
    if (bytes > this.#options.maxRingBytes) {
      this.#ring = null;
      this.#tooLarge =
        `${channels} channels at ${description.nominalRateHz} Hz need ${Math.ceil(bytes / 1e6)} MB for ` +
        `${this.#options.ringSeconds} s, ${Math.floor(this.#options.maxRingBytes / 1e6)} MB are allowed`;
      return;
    }
    this.#tooLarge = null;
    if (!this.#ring || this.#ring.channels !== channels || this.#ringSamples !== samples) {
      this.#ring = new RingWriter(channels, samples);
      this.#ringSamples = samples;
    }
    this.#epoch++;
    this.#description = description;
    this.#rate = new RateEstimator(description.nominalRateHz);
    const limited = description.channels.filter(({ countRange }) => countRange !== null);
    this.#overRange = new Map(limited.map(({ name }) => [name, this.#overRange.get(name) ?? 0]));
    this.#ring.beginEpoch(this.#epoch, firstIndex);
    this.#host.onEpoch({ epoch: this.#epoch, firstIndex, description, memory: this.#ring.memory, because });
  }

  #gap(n: number): void {
    this.#gaps++;
    this.#missingSamples += n;
    this.#ring?.skip(n);
  }

  #samples(planar: Int32Array, stride: number, n: number): void {
    if (!this.#ring || !this.#description) return;
    this.#description.channels.forEach(({ name, countRange }, c) => {
      if (!countRange) return;
      const count = countAtLimits(planar, c * stride, c * stride + n, countRange[0], countRange[1]);
      if (count > 0) this.#overRange.set(name, (this.#overRange.get(name) ?? 0) + count);
    });
    this.#ring.append(planar, stride, n);
    this.#samplesCame = true;
  }

  #tick(): void {
    const now = this.#host.now();
    this.#bytesAtTick.push({ ms: now, bytes: this.#bytes });
    if (this.#bytesAtTick.length > SPEED_TICKS) this.#bytesAtTick.shift();
    this.#judge();
    const uselessMs = now - Math.max(this.#lastFrameMs, this.#openedMs);
    if (this.#condition.kind === 'no-frames' && uselessMs > REOPEN_AFTER_MS) this.#supervisor.reopen();
    this.#cancelTick = this.#host.after(TICK_MS, () => this.#tick());
  }

  #judge(): void {
    const next = this.#judged(this.#supervisor.state, this.#host.now());
    const { kind, why } = this.#condition;
    if (next.kind === kind && next.why === why) return;
    this.#condition = { ...next, sinceMs: this.#host.now() };
    this.#host.onCondition(this.#condition);
  }

  #judged(state: SupervisorState, now: number): Omit<LinkCondition, 'sinceMs'> {
    const standing = this.#node?.standing;
    switch (state.kind) {
      case 'stopped':
        return { kind: 'stopped', why: '' };
      case 'opening':
        return { kind: 'waiting', why: 'opening' };
      case 'refused':
        return { kind: 'refused', why: `${state.error.message}. ${state.error.fix}` };
      case 'silent':
      case 'unplugged':
        return { kind: state.kind, why: state.why };
      case 'open':
        break;
    }
    if (standing?.kind === 'foreign') {
      const early = now - this.#openedMs < FOREIGN_AFTER_MS;
      return early
        ? { kind: 'waiting', why: 'another node speaks' }
        : { kind: 'foreign-node', why: standing.why };
    }
    if (this.#tooLarge !== null) return { kind: 'too-large', why: this.#tooLarge };
    if (now - this.#lastSamplesMs < SILENT_AFTER_MS) return { kind: 'receiving', why: '' };
    if (now - this.#openedMs < SILENT_AFTER_MS) return { kind: 'waiting', why: 'open, no samples yet' };
    if (now - this.#lastFrameMs >= SILENT_AFTER_MS) {
      // Neither frames nor bytes: as it was, until the supervisor calls it silent.
      if (now - this.#lastBytesMs > LATELY_MS)
        return { kind: this.#condition.kind, why: this.#condition.why };
      const what = this.#settings.format.kind === 'frames' ? 'frames' : 'lines of numbers';
      return { kind: 'no-frames', why: `bytes come that are no ${what}: see the baud rate and the format` };
    }
    const unheardMs = now - (this.#node?.heardMs ?? now);
    if (unheardMs >= SILENT_AFTER_MS && unheardMs < JUDGED_WITHIN_MS) {
      return { kind: 'waiting', why: 'another node speaks' };
    }
    return { kind: 'no-samples', why: 'the node speaks but sends no samples' };
  }
}

function transportOf({ transport }: LinkSettings): Transport {
  return transport.kind === 'serial'
    ? new SerialTransport(transport.path, transport.baud)
    : new TcpTransport(transport.host, transport.port);
}
