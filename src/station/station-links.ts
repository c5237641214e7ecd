/**
 * The links of the station with their sampling and measuring: samples in, readings out. Where a node cannot be
 * believed or heard, its points get readings without figures that say why, so that nothing old stands for the present.
 */

import type { LinkCondition as LinkAlarmCondition } from '../alarm/sensor.ts';
import type { Machine, Point, Station } from '../config/station.ts';
import { Link } from '../link/link.ts';
import type { LinkCondition, LinkHealth } from '../link/link-health.ts';
import { systemClock } from '../link/system-clock.ts';
import { measureRecord } from '../measure/measure.ts';
import { planPoint } from '../measure/plan.ts';
import type { Reading } from '../measure/reading.ts';
import type { MeasuringRoom } from './measuring-room.ts';
import { type DueRecord, LinkSampling, type Unfed } from './sampling.ts';
import type { ToldValues } from './told.ts';

export interface StationLinksHost {
  wallMs(): number;
  reading(point: Point, reading: Reading, wallMs: number, elapsedS: number | null): void;
  condition(link: string, conditions: readonly LinkAlarmCondition[], why: string | null): void;
}

/** Beside the longest record: how far measuring may fall behind before records are lost. */
const SPARE_S = 15;
const MAX_RING_BYTES = 256 * 1024 * 1024;
/** Sizes a ring before a node has said its rate; only the ratio of samples to seconds matters. */
const ASSUMED_RATE_HZ = 40_960;

/** What the alarms call each condition; the others are none. */
const alarmOf: Partial<Record<LinkCondition['kind'], LinkAlarmCondition>> = {
  refused: 'refused',
  'too-large': 'refused',
  silent: 'silent',
  unplugged: 'silent',
  'no-frames': 'silent',
  'no-samples': 'silent',
  'foreign-node': 'foreign-node',
};

interface Joined {
  link: Link;
  sampling: LinkSampling;
}

export class StationLinks {
  readonly #station: Station;
  readonly #room: MeasuringRoom;
  readonly #host: StationLinksHost;
  readonly #joined = new Map<string, Joined>();

  constructor(station: Station, room: MeasuringRoom, told: ToldValues, host: StationLinksHost) {
    this.#station = station;
    this.#room = room;
    this.#host = host;
    for (const settings of station.links) {
      const ringSeconds = longestRecordS(station, settings.id) + SPARE_S;
      const sampling = new LinkSampling(settings.id, station, ringSeconds, told, {
        rate: (id) => this.#joined.get(id)?.link.rate ?? null,
        wallMs: () => host.wallMs(),
        due: (record) => void this.#measure(record),
        standing: (id) => this.#joined.get(id)?.sampling.standing ?? null,
      });
      const link = new Link(
        settings,
        { ringSeconds, maxRingBytes: MAX_RING_BYTES },
        {
          ...systemClock,
          onEpoch: (start) => {
            room.addRing(settings.id, start.memory);
            sampling.begin(start);
            this.#report(settings.id, sampling.unfed);
          },
          onSamples: ({ head }) => sampling.advance(head),
          onCondition: (condition) => this.#conditionChanged(settings.id, condition),
        },
      );
      this.#joined.set(settings.id, { link, sampling });
    }
  }

  start(): void {
    for (const { link } of this.#joined.values()) link.start();
  }

  async stop(): Promise<void> {
    await Promise.all([...this.#joined.values()].map(({ link }) => link.stop()));
  }

  health(): Record<string, LinkHealth> {
    return Object.fromEntries([...this.#joined].map(([id, { link }]) => [id, link.health()]));
  }

  /** Records that were overwritten before they were asked for. */
  get skipped(): number {
    return [...this.#joined.values()].reduce((sum, { sampling }) => sum + sampling.skipped, 0);
  }

  async #measure(record: DueRecord): Promise<void> {
    const outcome = await this.#room.measure(record.job);
    if ('reading' in outcome)
      this.#host.reading(record.point, outcome.reading, record.wallMs, record.elapsedS);
  }

  #conditionChanged(id: string, { kind, why }: LinkCondition): void {
    const condition = alarmOf[kind];
    if (condition === undefined) {
      // While it is only waiting, what was wrong is still wrong.
      if (kind === 'receiving') this.#host.condition(id, [], null);
      return;
    }
    this.#host.condition(id, [condition], why);
    const entries = this.#station.machines.flatMap((machine) =>
      machine.points
        .filter((point) => point.link === id)
        .map((point) => ({ machine, point, why: `${kind}: ${why}` })),
    );
    this.#report(id, entries);
  }

  /** A reading without figures for each point that gets none at present. */
  #report(id: string, entries: readonly Unfed[]): void {
    const standing = this.#joined.get(id)?.sampling.standing;
    for (const { machine, point, why } of entries) {
      const rateHz = standing?.description.nominalRateHz ?? ASSUMED_RATE_HZ;
      const reading = blankReading(
        point,
        machine,
        rateHz,
        this.#station.site.mainsHz,
        standing?.head ?? 0,
        why,
      );
      if (reading) this.#host.reading(point, reading, this.#host.wallMs(), null);
    }
  }
}

/** null where not even the plan of the point can be made at that rate. */
function blankReading(
  point: Point,
  machine: Machine,
  rateHz: number,
  mainsHz: number,
  firstIndex: number,
  why: string,
): Reading | null {
  try {
    return measureRecord(planPoint(point, machine, rateHz, mainsHz), {
      counts: new Int32Array(0),
      firstIndex,
      unit: 'g',
      unitsPerCount: 1,
      countRange: null,
      rate: { hz: rateHz, source: 'nominal', ppm: null },
      tachometer: null,
      toldShaftHz: null,
      toldRunning: null,
      missingSamples: 0,
      distrust: [why],
    });
  } catch {
    return null;
  }
}

/** In seconds at the nominal rate. */
function longestRecordS(station: Station, linkId: string): number {
  const format = station.links.find(({ id }) => id === linkId)?.format;
  const told = format?.kind === 'columns' ? format.sampleRateHz : format?.expect.sampleRateHz;
  const rateHz = told ?? ASSUMED_RATE_HZ;
  let longest = 0;
  for (const machine of station.machines) {
    for (const point of machine.points.filter(({ link }) => link === linkId)) {
      const { recordSamples } = planPoint(point, machine, rateHz, station.site.mainsHz);
      longest = Math.max(longest, recordSamples / rateHz);
    }
  }
  return longest;
}
