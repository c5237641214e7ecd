/** What a plan has to say to whoever wrote the settings, and which frequencies its lines cannot tell apart. */

import { knownSourceAt } from '../machine/evidence-lines.ts';
import { mainLobeHalfWidthBins, type WindowName } from '../signal/window.ts';
import type { PointPlan } from './plan.ts';

/** A record promises 0 to rate/2.56 (common practice, no source). */
export const RATE_OVER_FMAX = 2.56;
/** A spectrum is averaged over two blocks at least: one alone hardly hears the record's ends. */
export const LEAST_AVERAGES = 2;
/** Two components closer than the main lobe of a Hann window, four lines wide between zeros, look like one. */
const TELL_APART_LINES = 2;

export class PlanNotes {
  /** For whoever writes the settings. */
  readonly warnings: string[] = [];
  /** Those of them that make every reading uncertain. */
  readonly caveats: string[] = [];

  warn(text: string): void {
    this.warnings.push(text);
  }

  caution(text: string): void {
    this.warnings.push(text);
    this.caveats.push(text);
  }
}

/** Notes bands that lie out of reach or are too narrow, and frequencies closer than the lines can tell apart. */
export function noteFrequencies(plan: Omit<PointPlan, 'warnings' | 'caveats'>, notes: PlanNotes): void {
  noteShaft(plan, notes);
  noteBands(plan, notes);
  noteMains(plan, notes);
  noteBearings(plan, notes);
}

type Frequency = readonly [name: string, hz: number];

function noteShaft(plan: Omit<PointPlan, 'warnings' | 'caveats'>, notes: PlanNotes): void {
  const { machine, point, shaft, spectrum, otherRatios } = plan;
  if (shaft !== null && ordersMerge(shaft.lowHz, spectrum)) {
    notes.warn(`orders will be null at ${hz(shaft.lowHz)}: lines of ${hz(spectrum.lineHz)} are too wide`);
  }
  if (shaft !== null && shaft.highHz > shaft.lowHz) {
    for (const ratio of otherRatios) {
      if (ratio * shaft.lowHz < shaft.highHz && ratio * shaft.highHz > shaft.lowHz) {
        notes.warn(
          'another shaft of the machine turns so nearly as fast that the speed may be taken from its lines: narrow the tolerance or give a tachometer',
        );
      }
    }
  }
  if (machine.shaft !== null) return;
  const orders = point.measure.bands.filter(({ range: band }) => 'orders' in band).map(({ id }) => id);
  const without = [...orders.map((id) => `band ${id}`), ...point.bearings.map(({ id }) => `bearing ${id}`)];
  if (without.length > 0) notes.warn(`no shaft speed is configured: nothing for ${without.join(', ')}`);
}

function noteBands(
  { point, shaft, spectrum }: Omit<PointPlan, 'warnings' | 'caveats'>,
  notes: PlanNotes,
): void {
  for (const band of point.measure.bands) {
    const edges = 'hz' in band.range ? band.range.hz : band.range.orders;
    // Within whatever speed the settings allow.
    const [slowest, fastest] = 'hz' in band.range ? [1, 1] : [shaft?.lowHz, shaft?.highHz];
    if (slowest === undefined || fastest === undefined) continue;
    const [low, high] = [edges[0] * slowest, edges[1] * fastest];
    const coarse = tooLow(low, spectrum, `band ${band.id}`);
    if (coarse !== null) notes.warn(`${coarse}: give more lines`);
    if (high > spectrum.fmaxHz) {
      notes.warn(
        `band ${band.id} reaches ${hz(high)}, above Fmax ${hz(spectrum.fmaxHz)}: there it will be null`,
      );
      continue;
    }
    const widthHz = (edges[1] - edges[0]) * ('hz' in band.range ? 1 : (shaft?.nominalHz ?? slowest));
    if (widthHz < 2 * TELL_APART_LINES * spectrum.lineHz) {
      notes.warn(`band ${band.id} is ${hz(widthHz)} wide, too narrow for lines of ${hz(spectrum.lineHz)}`);
    }
  }
}

function noteMains(plan: Omit<PointPlan, 'warnings' | 'caveats'>, notes: PlanNotes): void {
  const { machine, mainsHz, shaft, spectrum } = plan;
  if (machine.motor.supply !== 'mains' || shaft?.nominalHz == null) return;
  const harmonic = Math.round((2 * mainsHz) / shaft.nominalHz);
  const harmonicHz = harmonic * shaft.nominalHz;
  if (Math.abs(harmonicHz - 2 * mainsHz) < TELL_APART_LINES * spectrum.lineHz) {
    notes.warn(
      `lines of ${hz(spectrum.lineHz)} cannot tell ${harmonic}x of the shaft (${hz(harmonicHz)}) from twice mains (${hz(2 * mainsHz)})`,
    );
  }
}

function noteBearings(plan: Omit<PointPlan, 'warnings' | 'caveats'>, notes: PlanNotes): void {
  const { bearings, envelope, shaft } = plan;
  for (const { id, multiples } of bearings) {
    if (multiples === null)
      notes.warn(`bearing ${id}: neither geometry nor multiples nor elements are given`);
    else if (!multiples.certain)
      notes.warn(`bearing ${id}: geometry unknown, its frequencies are rules of thumb`);
  }
  if (envelope === null || shaft?.nominalHz == null) return;
  const { nominalHz: shaftHz } = shaft;
  const reachHz = TELL_APART_LINES * envelope.lineHz;
  const foreignHz = [2 * plan.mainsHz, ...plan.otherRatios.map((ratio) => ratio * shaftHz)];
  const lines = bearings.flatMap(({ id, nominalHz }): Frequency[] => {
    if (nominalHz === null) return [];
    const { ftf, bsf, bpfo, bpfi } = nominalHz;
    return [
      [`FTF of ${id}`, ftf],
      [`2xBSF of ${id}`, 2 * bsf],
      [`BPFO of ${id}`, bpfo],
      [`BPFI of ${id}`, bpfi],
    ];
  });
  for (const [index, [name, lineHz]] of lines.entries()) {
    if (lineHz > envelope.fmaxHz) notes.warn(`${name} (${hz(lineHz)}) lies above the envelope's Fmax`);
    for (const [other, otherHz] of lines.slice(index + 1)) {
      // The same frequency twice is the same bearing type at two places: no line spacing helps, and none is wrong.
      if (lineHz !== otherHz && Math.abs(lineHz - otherHz) < reachHz) {
        notes.warn(
          `envelope lines of ${hz(envelope.lineHz)} cannot tell ${name} (${hz(lineHz)}) from ${other} (${hz(otherHz)})`,
        );
      }
    }
    const source = knownSourceAt(lineHz, shaftHz, foreignHz, envelope.lineHz);
    if (source !== null) {
      const harmonic = Math.round(source / shaftHz);
      const what =
        Math.abs(source - harmonic * shaftHz) < 1e-6 * source
          ? `${harmonic}x of the shaft (${hz(source)})`
          : `${hz(source)} of another shaft or of twice mains`;
      notes.warn(`${name} (${hz(lineHz)}) lies on ${what}: that part of the bearing may never be named`);
    }
  }
}

/**
 * null, or that the lines cannot keep a band apart from 0 Hz, where the record drifts: the main lobe of a line at its
 * lower edge reaches there.
 */
export function tooLow(
  lowHz: number,
  { lineHz, window }: { readonly lineHz: number; readonly window: WindowName },
  name: string,
): string | null {
  if (lowHz >= mainLobeHalfWidthBins(window) * lineHz) return null;
  return `${name} from ${hz(lowHz)} needs lines finer than ${hz(lineHz)}`;
}

/** Half widths of the window's main lobe from one order to the next, below which one order's line lifts the next. */
const ORDERS_APART = 1.5;

/** Whether the lines are too wide for a shaft so slow to tell its orders apart. */
export function ordersMerge(
  shaftHz: number,
  { lineHz, window }: { readonly lineHz: number; readonly window: WindowName },
): boolean {
  return shaftHz < ORDERS_APART * mainLobeHalfWidthBins(window) * lineHz;
}

/** A frequency for a person. */
export function hz(value: number): string {
  return `${Number(value.toPrecision(4))} Hz`;
}

/** A band for a person. */
export function range(band: readonly [number, number]): string {
  return `${Number(band[0].toPrecision(4))} to ${hz(band[1])}`;
}
