/** A snapshot in the making: what is copied out of the ring, for whom, and what its tags will say. */

import type { Station } from '../config/station.ts';
import type { NodeDescription } from '../link/description.ts';
import type { RateUsed } from '../measure/reading.ts';
import { Capture, type CaptureSource } from '../snapshot/capture.ts';
import type { ShaftTag, SnapshotChannel, SnapshotTags } from '../snapshot/tags.ts';

/** Where the samples of a link are, at this moment. */
export interface LinkSource extends CaptureSource {
  link: string;
  /** Index after the newest sample. */
  head: number;
  /** Wall time when the newest sample came. */
  headMs: number;
  /** Why no samples come at present, so that the newest are old; null: they come. */
  trouble: string | null;
  description: NodeDescription;
  rate: RateUsed;
}

/** FLAC knows no more. */
const MAX_CHANNELS = 8;

/** What its tags will say: as things are when it is frozen, for it may wait an hour for its alarm. */
export interface MakingFacts extends Pick<SnapshotTags, 'id' | 'kind' | 'cause' | 'clock'> {
  /** Of all machines of the station. */
  shafts: readonly ShaftTag[];
}

/**
 * Which samples a snapshot holds, or will. A ring is known by its memory, since each link counts its epochs from 1; it
 * is not held by that, for its link may have gone.
 */
export interface Stretch {
  id: string;
  ring: WeakRef<SharedArrayBuffer>;
  epoch: number;
  first: number;
  /** Index after the last. */
  until: number;
}

/** Whether these samples of a link are within the stretch. */
export function holds(stretch: Stretch, source: LinkSource, first: number, end: number): boolean {
  return isOf(stretch, source) && stretch.first <= first && end <= stretch.until;
}

function isOf({ ring, epoch }: Stretch, source: LinkSource): boolean {
  return ring.deref() === source.memory && epoch === source.epoch;
}

export class Making {
  readonly id: string;
  readonly capture: Capture;
  /** Alarms whose reading it holds. */
  readonly holders = new Set<string>();
  /** Alarms that came of it. */
  readonly alarms = new Set<string>();
  readonly #facts: MakingFacts & Pick<SnapshotTags, 'site' | 'config'>;
  readonly #ring: WeakRef<SharedArrayBuffer>;
  readonly #of: Pick<LinkSource, 'link' | 'description' | 'rate'>;
  readonly #channels: readonly { index: number; channel: SnapshotChannel }[];
  readonly #startMs: number;

  constructor(station: Station, source: LinkSource, first: number, until: number, facts: MakingFacts) {
    this.id = facts.id;
    this.#facts = { ...facts, site: station.site.id, config: station.configHash };
    this.#ring = new WeakRef(source.memory);
    const { link, description, rate } = source;
    this.#of = { link, description, rate };
    this.#channels = channelsOf(station, source);
    const indices = this.#channels.map(({ index }) => index);
    this.capture = new Capture(source, indices, first, until);
    this.#startMs = source.headMs - ((source.head - this.capture.first) / source.rate.hz) * 1000;
  }

  /** To be kept whether or not an alarm comes of it. */
  get wanted(): boolean {
    return this.#facts.kind !== 'alarm' || this.alarms.size > 0;
  }

  get stretch(): Stretch {
    const { epoch, first, until } = this.capture;
    return { id: this.id, ring: this.#ring, epoch, first, until };
  }

  /** Whether it is still growing and would hold these samples if it grew on. */
  reaches(source: LinkSource, first: number): boolean {
    return !this.capture.done && holds(this.stretch, source, first, first);
  }

  tags(context: Pick<SnapshotTags, 'version' | 'takenRunS' | 'gaps'>): SnapshotTags {
    const { link, description, rate } = this.#of;
    const channels = this.#channels.map(({ channel }) => channel);
    const machines = [...new Set(channels.flatMap(({ points }) => points.map((key) => key.split('/')[0]!)))];
    return {
      ...context,
      ...this.#facts,
      shafts: this.#facts.shafts.filter(({ machine }) => machines.includes(machine)),
      machines,
      link,
      nominalRateHz: description.nominalRateHz,
      rate,
      start: new Date(this.#startMs).toISOString(),
      firstIndex: this.capture.first,
      nodeSerial: description.serialNumber,
      alarms: [...this.alarms],
      channels,
    };
  }
}

/** All channels of the node; where it has more than FLAC can hold, those that points use first. */
function channelsOf(
  station: Station,
  { link, description }: LinkSource,
): { index: number; channel: SnapshotChannel }[] {
  const points = station.machines.flatMap((machine) => machine.points).filter((point) => point.link === link);
  const all = description.channels.map((described, index) => {
    const { name, unit, unitsPerCount, countRange } = described;
    const keys = points.filter(({ channel }) => channel === name).map(({ key }) => key);
    return { index, channel: { name, unit, unitsPerCount, countRange, points: keys } };
  });
  if (all.length <= MAX_CHANNELS) return all;
  const rank = ({ channel }: (typeof all)[number]) =>
    channel.points.length > 0 ? 0 : channel.unit === 'logic' ? 1 : 2;
  return all
    .toSorted((a, b) => rank(a) - rank(b) || a.index - b.index)
    .slice(0, MAX_CHANNELS)
    .sort((a, b) => a.index - b.index);
}
