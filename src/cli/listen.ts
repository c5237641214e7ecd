/**
 * `forebay listen`: for whoever stands at the machine. Each second, per channel: the live sample rate, gaps,
 * over-range, RMS, peak and a verdict. It takes the place of the agent, so it refuses while the agent runs.
 */

import { loadStation } from '../config/load.ts';
import type { Station } from '../config/station.ts';
import type { ChannelDescription } from '../link/description.ts';
import { type EpochStart, Link } from '../link/link.ts';
import { RingReader } from '../link/ring.ts';
import { systemClock } from '../link/system-clock.ts';
import { lockDirectory, makeDirectory } from '../store/open-file.ts';
import { channelVerdict } from './channel-verdict.ts';

const RING_SECONDS = 4;
const MAX_RING_BYTES = 64 * 1024 * 1024;
const PERIOD_MS = 1000;

interface Output {
  write(text: string): unknown;
}

export async function listenCommand(options: {
  config: string;
  seconds: number | null;
  out: Output;
}): Promise<number> {
  const station = loadStation(options.config);
  makeDirectory(station.storage.directory);
  const lock = lockDirectory(station.storage.directory);
  const ears = station.links.map((settings) => new Ear(station, settings.id));
  for (const ear of ears) ear.link.start();
  let stop: () => void = () => undefined;
  const done = new Promise<void>((resolve) => {
    stop = resolve;
  });
  process.once('SIGINT', stop);
  process.once('SIGTERM', stop);
  const timer = setInterval(() => {
    for (const ear of ears) for (const line of ear.lines()) options.out.write(`${line}\n`);
  }, PERIOD_MS);
  if (options.seconds !== null) setTimeout(stop, options.seconds * 1000);
  await done;
  clearInterval(timer);
  await Promise.all(ears.map((ear) => ear.link.stop()));
  lock.close();
  return ears.some((ear) => ear.heard) ? 0 : 1;
}

class Ear {
  readonly link: Link;
  readonly #station: Station;
  #start: EpochStart | null = null;
  #ring: RingReader | null = null;

  constructor(station: Station, linkId: string) {
    const settings = station.links.find((link) => link.id === linkId);
    if (!settings) throw new RangeError(`no link ${linkId}`);
    this.#station = station;
    this.link = new Link(
      settings,
      { ringSeconds: RING_SECONDS, maxRingBytes: MAX_RING_BYTES },
      {
        ...systemClock,
        onEpoch: (start) => {
          this.#start = start;
          this.#ring = new RingReader(start.memory);
        },
        onSamples: () => undefined,
        onCondition: () => undefined,
      },
    );
  }

  /** A node has described itself. */
  get heard(): boolean {
    return this.#start !== null;
  }

  lines(): string[] {
    const health = this.link.health();
    const { kind, why } = health.condition;
    if (kind !== 'receiving' || !this.#start) return [`${this.link.id}: ${kind}${why ? `, ${why}` : ''}`];
    const measured = health.measuredRate;
    const nominal = this.#start.description.nominalRateHz;
    const rate = measured
      ? `${measured.hz.toFixed(1)} Hz ± ${Math.ceil(measured.ppm)} ppm`
      : 'rate not measured yet';
    const head = `${this.link.id}: ${rate} (claims ${nominal} Hz), ${health.gaps} gaps, ${health.missingSamples} samples missing`;
    return [
      head,
      ...this.#start.description.channels.map((channel, i) =>
        this.#channelLine(channel, i, health.overRange),
      ),
    ];
  }

  #channelLine(
    channel: ChannelDescription,
    index: number,
    overRange: Readonly<Record<string, number>>,
  ): string {
    const samples = Math.floor(this.#start?.description.nominalRateHz ?? 0);
    const counts = new Int32Array(samples);
    const epoch = this.#start?.epoch ?? 0;
    const first = (this.#ring?.head ?? 0) - samples;
    const read = first < 0 ? 'not-yet' : this.#ring?.read(epoch, index, first, samples, counts);
    if (read !== 'ok') return `  ${channel.name}: less than a second so far`;
    const trust = this.#station.links.find(({ id }) => id === this.link.id)?.sensors[channel.name];
    const { rms, peak, verdict } = channelVerdict(counts, channel, trust?.rangeG ?? null);
    if (channel.unit === 'logic') return `  ${channel.name}: ${verdict}`;
    const unit = channel.unit === 'm/s2' ? 'm/s²' : 'g';
    const over = overRange[channel.name] ?? 0;
    return `  ${channel.name}: RMS ${rms.toPrecision(3)} ${unit}, peak ${peak.toPrecision(3)} ${unit}, ${over} over-range: ${verdict}`;
  }
}
