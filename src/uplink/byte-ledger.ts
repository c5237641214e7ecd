/**
 * What the uplink costs, by class, in periods of 24 h of run time (wall time jumps). Bytes are those of the raw
 * socket, under TLS, both ways, plus an estimate of what IP and TCP add. What a message costs beyond its own packet
 * is the share of `link`, which counts against the ceiling like the rest; only alarms do not, and waveforms have a
 * ceiling of their own.
 */

import { type BudgetLine, type MessageClass, messageClasses } from '../store/types.ts';

const daySeconds = 86_400;
/** IPv4 20, TCP 20, timestamps 12 (RFC 791, RFC 9293, RFC 7323). */
const segmentHeaderBytes = 52;
/** Payload of a full segment over a modem; common practice, no source. */
const segmentPayloadBytes = 1360;
/** From this share on, what can wait does; the rest is for states, findings and answers. */
const bulkShare = 0.9;
/** The class of the parts of waveforms. */
const waveforms = 'snapshot';
const bulk: readonly MessageClass[] = ['reading', 'trend', 'health'];

/** Counters of one connection; they only grow. */
export interface Meter {
  sentBytes(): number;
  receivedBytes(): number;
  sentPackets(): number;
  receivedPackets(): number;
}

interface Tally {
  sentBytes: number;
  receivedBytes: number;
}

export class ByteLedger {
  readonly #bytesPerDay: number;
  readonly #waveformBytesPerDay: number;
  readonly #runS: () => number;
  #day = -1;
  #byClass = new Map<string, Tally>();
  #meter: Meter | null = null;
  /** Totals of the meter that are in the books already, header estimates included. */
  #booked: Tally = { sentBytes: 0, receivedBytes: 0 };
  /** Bytes of messages booked under their class before they showed in the meter's total. */
  #ahead = 0;

  constructor(bytesPerDay: number, waveformBytesPerDay: number, runS: () => number) {
    this.#bytesPerDay = bytesPerDay;
    this.#waveformBytesPerDay = waveformBytesPerDay;
    this.#runS = runS;
  }

  /** The running period, as the store numbers it. */
  get day(): number {
    return Math.floor(this.#runS() / daySeconds);
  }

  restore(lines: readonly BudgetLine[]): void {
    this.#turnDay();
    for (const line of lines) {
      if (line.day !== this.#day) continue;
      this.#add(line.class, line.sentBytes, line.receivedBytes);
    }
  }

  /** A new connection; null: none. */
  follow(meter: Meter | null): void {
    this.settle();
    this.#meter = meter;
    this.#booked = { sentBytes: 0, receivedBytes: 0 };
    this.#ahead = 0;
  }

  /** A message went out: its own packet belongs to its class. */
  published(name: MessageClass, packetBytes: number): void {
    this.#turnDay();
    this.#add(name, packetBytes, 0);
    this.#ahead += packetBytes;
  }

  /** A part of a waveform went out, with the headers of the segments that carry it. */
  publishedPart(packetBytes: number): void {
    this.#turnDay();
    const bytes = packetBytes + Math.ceil(packetBytes / segmentPayloadBytes) * segmentHeaderBytes;
    this.#add(waveforms, bytes, 0);
    this.#ahead += bytes;
  }

  /** Books what the meter counted since the last time. */
  settle(): void {
    this.#turnDay();
    if (this.#meter === null) return;
    const total = costOf(this.#meter);
    const sent = total.sentBytes - this.#booked.sentBytes;
    const fromClasses = Math.min(sent, this.#ahead);
    this.#ahead -= fromClasses;
    this.#add('link', sent - fromClasses, total.receivedBytes - this.#booked.receivedBytes);
    this.#booked = total;
  }

  /** Bytes that all but alarms may still cost in this period; never below 0. */
  leftBytes(): number {
    return Math.max(0, this.#bytesPerDay - this.#spent());
  }

  /** Bytes that waveforms may still cost in this period. */
  waveformsLeftBytes(): number {
    this.#turnDay();
    return Math.max(0, this.#waveformBytesPerDay - (this.#byClass.get(waveforms)?.sentBytes ?? 0));
  }

  /** Seconds until the next period. */
  renewsInS(): number {
    return (this.day + 1) * daySeconds - this.#runS();
  }

  /** What may be sent now: alarms always; what can wait, not while `bulkWaits`. */
  allowedClasses(bulkWaits = false): readonly MessageClass[] {
    const spent = this.#spent();
    if (spent >= this.#bytesPerDay) return ['alarm'];
    if (spent < this.#bytesPerDay * bulkShare && !bulkWaits) return messageClasses;
    return messageClasses.filter((name) => !bulk.includes(name));
  }

  /** The books of this period, for the store and for `health`. */
  lines(): BudgetLine[] {
    this.settle();
    return [...this.#byClass].map(([name, tally]) => ({ day: this.#day, class: name, ...tally }));
  }

  #spent(): number {
    this.settle();
    let spent = 0;
    for (const [name, tally] of this.#byClass) {
      if (name !== 'alarm' && name !== waveforms) spent += tally.sentBytes + tally.receivedBytes;
    }
    return spent;
  }

  #turnDay(): void {
    if (this.day === this.#day) return;
    this.#day = this.day;
    this.#byClass = new Map();
  }

  #add(name: string, sentBytes: number, receivedBytes: number): void {
    const tally = this.#byClass.get(name) ?? { sentBytes: 0, receivedBytes: 0 };
    tally.sentBytes += sentBytes;
    tally.receivedBytes += receivedBytes;
    this.#byClass.set(name, tally);
  }
}

/** Each packet is at least a segment; each segment draws an acknowledgement of headers alone the other way. */
function costOf(meter: Meter): Tally {
  const sent = meter.sentBytes();
  const received = meter.receivedBytes();
  const segments =
    Math.max(meter.sentPackets(), Math.ceil(sent / segmentPayloadBytes)) +
    Math.max(meter.receivedPackets(), Math.ceil(received / segmentPayloadBytes));
  return {
    sentBytes: sent + segments * segmentHeaderBytes,
    receivedBytes: received + segments * segmentHeaderBytes,
  };
}
