/**
 * From the samples of one link to measuring jobs: which points a node feeds, which of their records are due, and with
 * which rate, scale and speed each is measured. Runs on the thread that reads serial, so it only counts.
 */

import type { Machine, Point, Station } from '../config/station.ts';
import type { ChannelDescription, NodeDescription } from '../link/description.ts';
import type { EpochStart } from '../link/link.ts';
import type { RateEstimate } from '../link/rate-estimate.ts';
import { type PointPlan, planPoint } from '../measure/plan.ts';
import type { RateUsed } from '../measure/reading.ts';
import type { MeasureJob, RingSpan } from './measure-job.ts';
import { RecordSchedule } from './schedule.ts';
import type { ToldValues } from './told.ts';

export interface DueRecord {
  point: Point;
  machine: Machine;
  job: Omit<MeasureJob, 'id'>;
  /** Wall time of the record's last sample: a label. */
  wallMs: number;
  /** Sample time since the end of the point's previous record; null: none in this epoch. */
  elapsedS: number | null;
}

/** A point that its node cannot feed, and why. */
export interface Unfed {
  point: Point;
  machine: Machine;
  why: string;
}

export interface SamplingHost {
  rate(link: string): RateEstimate | null;
  wallMs(): number;
  due(record: DueRecord): void;
  /** Where a link stands, for the tachometer of another one. */
  standing(link: string): LinkStanding | null;
}

export interface LinkStanding {
  epoch: number;
  head: number;
  /** Wall time when the newest sample came: a label. */
  headMs: number;
  description: NodeDescription;
}

interface FedPoint {
  point: Point;
  machine: Machine;
  plan: PointPlan;
  channel: number;
  described: ChannelDescription;
  tachometer: MeasureJob['tachometer'];
  schedule: RecordSchedule;
  previousEnd: number | null;
}

export class LinkSampling {
  readonly #link: string;
  #station: Station;
  readonly #told: ToldValues;
  readonly #host: SamplingHost;
  readonly #ringSeconds: number;
  #standing: LinkStanding | null = null;
  #points: FedPoint[] = [];
  #skippedBefore = 0;
  #unfed: Unfed[] = [];

  constructor(link: string, station: Station, ringSeconds: number, told: ToldValues, host: SamplingHost) {
    this.#link = link;
    this.#station = station;
    this.#ringSeconds = ringSeconds;
    this.#told = told;
    this.#host = host;
  }

  get standing(): LinkStanding | null {
    return this.#standing;
  }

  get ringSeconds(): number {
    return this.#ringSeconds;
  }

  /** Goes on with another station over the same samples: each point's next record begins where its last one let off. */
  replan(station: Station): void {
    this.#station = station;
    const standing = this.#standing;
    if (!standing) return;
    this.#skippedBefore = this.skipped;
    const before = new Map(this.#points.map((fed) => [fed.point.key, fed]));
    this.#feedAll(standing.description, (key) => before.get(key)?.schedule.next ?? standing.head);
    for (const fed of this.#points) fed.previousEnd = before.get(fed.point.key)?.previousEnd ?? null;
  }

  /** Points of this link that the node cannot feed. */
  get unfed(): readonly Unfed[] {
    return this.#unfed;
  }

  /** Records that were overwritten before they were asked for. */
  get skipped(): number {
    return this.#skippedBefore + this.#points.reduce((sum, { schedule }) => sum + schedule.skipped, 0);
  }

  begin({ epoch, firstIndex, description }: EpochStart): void {
    this.#skippedBefore = this.skipped;
    this.#standing = { epoch, head: firstIndex, headMs: this.#host.wallMs(), description };
    this.#feedAll(description, () => firstIndex);
  }

  advance(head: number): void {
    const standing = this.#standing;
    if (!standing) return;
    standing.head = head;
    standing.headMs = this.#host.wallMs();
    const oldest = head - Math.floor(this.#ringSeconds * standing.description.nominalRateHz);
    for (const fed of this.#points) {
      for (const { first, samples } of fed.schedule.due(head, oldest)) {
        this.#host.due(
          this.#record(fed, {
            link: this.#link,
            epoch: standing.epoch,
            channel: fed.channel,
            first,
            samples,
          }),
        );
      }
    }
  }

  /** @param from the index from which on a point wants records, by its key. */
  #feedAll(description: NodeDescription, from: (pointKey: string) => number): void {
    this.#points = [];
    this.#unfed = [];
    for (const machine of this.#station.machines) {
      for (const point of machine.points) {
        if (point.link === this.#link) this.#feed(machine, point, description, from(point.key));
      }
    }
  }

  #feed(machine: Machine, point: Point, description: NodeDescription, firstIndex: number): void {
    const channel = description.channels.findIndex(({ name }) => name === point.channel);
    const described = description.channels[channel];
    if (!described || described.unit === 'logic') {
      const what = described
        ? 'is a tachometer'
        : `is not among ${description.channels.map(({ name }) => name).join(', ')}`;
      this.#unfed.push({ machine, point, why: `channel ${point.channel} ${what}` });
      return;
    }
    let plan: PointPlan;
    try {
      plan = planPoint(point, machine, description.nominalRateHz, this.#station.site.mainsHz);
    } catch (error) {
      this.#unfed.push({ machine, point, why: (error as Error).message });
      return;
    }
    this.#points.push({
      point,
      machine,
      plan,
      channel,
      described,
      tachometer: this.#tachometer(machine, description),
      schedule: new RecordSchedule(plan.stepSamples, plan.recordSamples, firstIndex),
      previousEnd: null,
    });
  }

  #tachometer({ shaft }: Machine, description: NodeDescription): MeasureJob['tachometer'] {
    if (shaft?.kind !== 'tachometer' || shaft.link !== this.#link) return null;
    const channel = description.channels.findIndex(({ name }) => name === shaft.channel);
    return channel < 0 ? null : { channel, pulsesPerRev: shaft.pulsesPerRev };
  }

  #record(fed: FedPoint, span: RingSpan): DueRecord {
    const { point, machine, plan, described } = fed;
    const rate = usedRate(this.#host.rate(this.#link), plan.rateHz);
    const end = span.first + span.samples;
    const elapsedS = fed.previousEnd === null ? null : (end - fed.previousEnd) / rate.hz;
    fed.previousEnd = end;
    const lateMs = (((this.#standing?.head ?? end) - end) / rate.hz) * 1000;
    const { shaft, running } = machine;
    return {
      point,
      machine,
      wallMs: this.#host.wallMs() - lateMs,
      elapsedS,
      job: {
        pointKey: point.key,
        span,
        nominalRateHz: plan.rateHz,
        rate,
        unit: described.unit === 'm/s2' ? 'm/s2' : 'g',
        unitsPerCount: described.unitsPerCount,
        countRange: described.countRange,
        tachometer: fed.tachometer,
        otherTachometer: fed.tachometer ? null : this.#otherTachometer(machine, span.samples / rate.hz),
        toldShaftHz: shaft?.kind === 'mqtt' ? this.#told.shaftHz(shaft.topic) : null,
        toldRunning: running.kind === 'mqtt' ? this.#told.running(running.topic) : null,
        distrust: [],
      },
    };
  }

  /** The newest stretch of the other node's tachometer, as long as the record. */
  #otherTachometer({ shaft }: Machine, seconds: number): MeasureJob['otherTachometer'] {
    if (shaft?.kind !== 'tachometer' || shaft.link === this.#link) return null;
    const other = this.#host.standing(shaft.link);
    if (!other) return null;
    const channel = other.description.channels.findIndex(({ name }) => name === shaft.channel);
    const rate = usedRate(this.#host.rate(shaft.link), other.description.nominalRateHz);
    const samples = Math.floor(seconds * rate.hz);
    if (channel < 0 || other.head < samples) return null;
    const span = { link: shaft.link, epoch: other.epoch, channel, first: other.head - samples, samples };
    return { span, pulsesPerRev: shaft.pulsesPerRev, rate };
  }
}

/** The rate as it is published, so that a replay can be given the very same one. */
export function usedRate(estimate: RateEstimate | null, nominalHz: number): RateUsed {
  if (!estimate) return { hz: nominalHz, source: 'nominal', ppm: null };
  return { hz: Number(estimate.hz.toPrecision(9)), source: estimate.source, ppm: estimate.ppm };
}
