/**
 * The links of the station with their sampling and measuring: samples in, readings out. Where a node cannot be
 * believed or heard, or its samples not be measured, its points get readings without figures that say why, so that
 * nothing old stands for the present.
 */

import type { LinkCondition as LinkAlarmCondition } from '../alarm/sensor.ts';
import type { LinkSettings, Machine, Point, Station } from '../config/station.ts';
import { type EpochStart, Link } from '../link/link.ts';
import type { LinkCondition, LinkHealth } from '../link/link-health.ts';
import { systemClock } from '../link/system-clock.ts';
import { measureRecord } from '../measure/measure.ts';
import { type PointPlan, planPoint } from '../measure/plan.ts';
import type { Reading } from '../measure/reading.ts';
import type { MeasuringSetup } from './measure-job.ts';
import type { MeasuringRoom } from './measuring-room.ts';
import { type DueRecord, LinkSampling, type Unfed, usedRate } from './sampling.ts';
import { BEFORE_S } from './snapshot-keeper.ts';
import type { LinkSource } from './snapshot-making.ts';
import type { ToldValues } from './told.ts';

type MachinePoint = Omit<Unfed, 'why'>;
type Room = Pick<MeasuringRoom, 'addRing' | 'forgetRing' | 'replan' | 'measure'>;

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
  settings: LinkSettings;
  link: Link;
  sampling: LinkSampling;
  /** Of the epoch that runs; null: no samples yet. */
  start: EpochStart | null;
}

export class StationLinks {
  #station: Station;
  readonly #room: Room;
  readonly #told: ToldValues;
  readonly #host: StationLinksHost;
  readonly #joined = new Map<string, Joined>();
  /** What the figures of each point depend on. */
  #measuredBy: ReadonlyMap<string, string>;
  /** How long ago each point that gets no samples was told as one. */
  readonly #unfedS = new WeakMap<Unfed, number>();
  #stopped = false;
  #outdated = 0;

  constructor(station: Station, room: Room, told: ToldValues, host: StationLinksHost) {
    this.#station = station;
    this.#room = room;
    this.#told = told;
    this.#host = host;
    this.#measuredBy = measuredBy(station);
    for (const settings of station.links)
      this.#join(settings, longestRecordS(station, settings.id) + SPARE_S);
  }

  start(): void {
    for (const { link } of this.#joined.values()) link.start();
  }

  async stop(): Promise<void> {
    this.#stopped = true;
    await Promise.all([...this.#joined.values()].map(({ link }) => link.stop()));
  }

  /**
   * Goes on with another station. Links whose line and format stay are not touched: their samples go on, and each
   * point's next record begins where its last one let off. Other links are closed and opened anew.
   * @param ringSeconds as `ringSecondsOf` gives them.
   */
  async replan(station: Station, ringSeconds: ReadonlyMap<string, number>): Promise<void> {
    const kept = new Set(
      station.links
        .filter((settings) => {
          const joined = this.#joined.get(settings.id);
          return (
            joined &&
            sameLine(joined.settings, settings) &&
            joined.sampling.ringSeconds >= (ringSeconds.get(settings.id) ?? 0)
          );
        })
        .map(({ id }) => id),
    );
    const before = this.#measuredBy;
    this.#station = station;
    this.#measuredBy = measuredBy(station);
    this.#room.replan(setupOf(station), ({ pointKey, span, otherTachometer }) => {
      const links = otherTachometer ? [span.link, otherTachometer.span.link] : [span.link];
      return before.get(pointKey) === this.#measuredBy.get(pointKey) && links.every((id) => kept.has(id));
    });
    const closing: Promise<void>[] = [];
    for (const [id, { link, sampling }] of this.#joined) {
      if (kept.has(id)) {
        sampling.replan(station);
        continue;
      }
      this.#joined.delete(id);
      this.#room.forgetRing(id);
      closing.push(link.stop());
    }
    const joining = station.links
      .filter(({ id }) => !kept.has(id))
      .map((settings) => this.#join(settings, ringSeconds.get(settings.id) ?? SPARE_S));
    // Two links may have changed places: a device is free only once its old link has let go of it.
    await Promise.all(closing);
    if (this.#stopped) return;
    for (const link of joining) link.start();
    for (const id of kept) {
      const { link, sampling } = this.#joined.get(id)!;
      this.#report(id, sampling.unfed);
      // What was told when the link fell silent was told of the points of then.
      const fresh = this.#pointsOf(id).filter(
        ({ point: { key } }) => before.get(key) !== this.#measuredBy.get(key),
      );
      if (fresh.length > 0) this.#tellUnheard(id, link.health().condition, fresh);
    }
  }

  /** Once a second: a point that its node does not feed is told as one at each interval, as if it gave no figures. */
  tick(elapsedS: number): void {
    for (const [id, { link, sampling }] of this.#joined) {
      const receiving = link.health().condition.kind === 'receiving';
      for (const unfed of receiving ? sampling.unfed : []) {
        const waitedS = (this.#unfedS.get(unfed) ?? 0) + elapsedS;
        const due = waitedS >= unfed.point.measure.everyS;
        this.#unfedS.set(unfed, due ? 0 : waitedS);
        if (due) this.#report(id, [unfed], waitedS);
      }
    }
  }

  /** Where the samples of a link are; null: it has had none. */
  source(id: string): LinkSource | null {
    const joined = this.#joined.get(id);
    const standing = joined?.sampling.standing;
    if (!joined?.start || !standing) return null;
    const { memory, epoch, firstIndex: epochFirst, description } = joined.start;
    const { head, headMs } = standing;
    const { rate: estimate, condition } = joined.link;
    const rate = usedRate(estimate, description.nominalRateHz);
    const trouble = condition.kind === 'receiving' ? null : condition.why || condition.kind;
    return { link: id, memory, epoch, epochFirst, head, headMs, trouble, description, rate };
  }

  health(): Record<string, LinkHealth> {
    return Object.fromEntries([...this.#joined].map(([id, { link }]) => [id, link.health()]));
  }

  /** Records that were overwritten before they were asked for, or measured for a configuration that has gone. */
  get skipped(): number {
    const overwritten = [...this.#joined.values()].reduce((sum, { sampling }) => sum + sampling.skipped, 0);
    return overwritten + this.#outdated;
  }

  #join(settings: LinkSettings, ringSeconds: number): Link {
    const { id } = settings;
    const sampling = new LinkSampling(id, this.#station, ringSeconds, this.#told, {
      rate: (other) => this.#joined.get(other)?.link.rate ?? null,
      wallMs: () => this.#host.wallMs(),
      due: (record) => void this.#measure(record),
      standing: (other) => this.#joined.get(other)?.sampling.standing ?? null,
    });
    const link: Link = new Link(
      settings,
      { ringSeconds, maxRingBytes: MAX_RING_BYTES },
      {
        ...systemClock,
        onEpoch: (start) => {
          this.#room.addRing(id, start.memory);
          joined.start = start;
          sampling.begin(start);
          this.#report(id, sampling.unfed);
        },
        onSamples: ({ head }) => sampling.advance(head),
        onCondition: (condition) => {
          // The last words of a link that has left.
          if (this.#joined.get(id)?.link === link) this.#conditionChanged(id, condition);
        },
      },
    );
    const joined: Joined = { settings, link, sampling, start: null };
    this.#joined.set(id, joined);
    return link;
  }

  async #measure(record: DueRecord): Promise<void> {
    const { key } = record.point;
    const by = this.#measuredBy.get(key);
    const outcome = await this.#room.measure(record.job);
    const outdated = this.#measuredBy.get(key) !== by;
    if ('reading' in outcome) {
      if (outdated) this.#outdated++;
      else this.#host.reading(record.point, outcome.reading, record.wallMs, record.elapsedS);
    } else if (outcome.failed === true && !outdated) {
      const { point, machine, job } = record;
      const { mainsHz } = this.#station.site;
      const why = `measuring ${outcome.missed}`;
      const blank = blankReading(point, machine, job.nominalRateHz, mainsHz, job.span.first, why);
      if (blank) this.#host.reading(point, blank, record.wallMs, record.elapsedS);
    }
  }

  #conditionChanged(id: string, condition: LinkCondition): void {
    if (condition.kind === 'receiving') this.#host.condition(id, [], null);
    // While it is only waiting, what was wrong is still wrong.
    else this.#tellUnheard(id, condition, this.#pointsOf(id));
  }

  /** That a link is not to be believed or heard, if so it is. */
  #tellUnheard(id: string, { kind, why }: LinkCondition, points: readonly MachinePoint[]): void {
    const condition = alarmOf[kind];
    if (condition === undefined) return;
    this.#host.condition(id, [condition], why);
    this.#report(
      id,
      points.map((at) => ({ ...at, why: `${kind}: ${why}` })),
    );
  }

  #pointsOf(id: string): MachinePoint[] {
    return this.#station.machines.flatMap((machine) =>
      machine.points.filter(({ link }) => link === id).map((point) => ({ machine, point })),
    );
  }

  /** A reading without figures for each point that gets none at present. */
  #report(id: string, entries: readonly Unfed[], elapsedS: number | null = null): void {
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
      if (reading) this.#host.reading(point, reading, this.#host.wallMs(), elapsedS);
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
    return measureRecord(planForShape(point, machine, rateHz, mainsHz), {
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

/** Of a reading without figures only its keys are of the plan: where the node's rate allows none, any rate gives them. */
function planForShape(point: Point, machine: Machine, rateHz: number, mainsHz: number): PointPlan {
  try {
    return planPoint(point, machine, rateHz, mainsHz);
  } catch {
    return planPoint(point, machine, ASSUMED_RATE_HZ, mainsHz);
  }
}

/** What the measuring worker needs to know of a station. */
export function setupOf({ machines, site }: Station): MeasuringSetup {
  const points = machines.flatMap((machine) => machine.points.map((point) => ({ point, machine })));
  return { points, mainsHz: site.mainsHz };
}

/** All that the figures of a point depend on, by its key: equal text, equal figures. */
function measuredBy(station: Station): ReadonlyMap<string, string> {
  return new Map(
    station.machines.flatMap(({ points, ...machine }) =>
      points.map((point) => [point.key, JSON.stringify([point, machine, station.site.mainsHz])] as const),
    ),
  );
}

function sameLine(a: LinkSettings, b: LinkSettings): boolean {
  return JSON.stringify([a.transport, a.format]) === JSON.stringify([b.transport, b.format]);
}

/** What the ring of each link has to hold, in seconds. @throws RangeError where a point cannot be measured so. */
export function ringSecondsOf(station: Station): ReadonlyMap<string, number> {
  return new Map(station.links.map(({ id }) => [id, longestRecordS(station, id) + SPARE_S]));
}

/** In seconds at the nominal rate. */
function longestRecordS(station: Station, linkId: string): number {
  const format = station.links.find(({ id }) => id === linkId)?.format;
  const told = format?.kind === 'columns' ? format.sampleRateHz : format?.expect.sampleRateHz;
  const rateHz = told ?? ASSUMED_RATE_HZ;
  // A snapshot reaches so far back.
  let longest = BEFORE_S;
  for (const machine of station.machines) {
    for (const point of machine.points.filter(({ link }) => link === linkId)) {
      const { recordSamples } = planPoint(point, machine, rateHz, station.site.mainsHz);
      longest = Math.max(longest, recordSamples / rateHz);
    }
  }
  return longest;
}
