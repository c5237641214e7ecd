/** Measuring settings as they come together at a point; each mistake is placed where the key stands. */

import { checkIds, checkOneOf } from './check-ids.ts';
import type { Report } from './issues.ts';
import { mergeMeasure } from './merge-measure.ts';
import type { LooseStationFile } from './schema.ts';
import type { KeyPath } from './yaml-text.ts';

type LooseMachine = NonNullable<NonNullable<LooseStationFile['machines']>[number]>;
type LoosePoint = NonNullable<NonNullable<LooseMachine['points']>[number]>;

const reservedBands = { unit: 'a key of the reading', overall: 'a key of the reading' };
/** Longer records would not fit the rings; the plan refuses them too. */
const longestRecordS = 600;

export function checkMeasure(
  file: LooseStationFile,
  machine: LooseMachine,
  point: LoosePoint,
  [machineIndex, pointIndex]: readonly [number, number],
  report: Report,
): void {
  const layers = [
    { at: ['measure'], measure: file.measure },
    { at: ['machines', machineIndex, 'measure'], measure: machine.measure },
    { at: ['machines', machineIndex, 'points', pointIndex, 'measure'], measure: point.measure },
  ];
  const merged = mergeMeasure(layers.map((layer) => layer.measure));
  const origin = (given: (measure: NonNullable<LoosePoint['measure']>) => unknown): KeyPath =>
    layers.findLast((layer) => layer.measure !== undefined && given(layer.measure) !== undefined)?.at ?? [
      'measure',
    ];

  const bandsAt = [...origin((measure) => measure.bands), 'bands'];
  checkIds(merged.bands, bandsAt, 'band', reservedBands, report);
  for (const [index, band] of merged.bands.entries()) {
    if (band === undefined) continue;
    const at = [...bandsAt, index];
    checkOneOf(band, ['hz', 'orders'], at, true, report);
    const top = band.hz?.[1];
    if (top !== undefined && top > merged.velocity.fmax_hz) {
      const message = `reaches ${top} Hz, above velocity.fmax_hz ${merged.velocity.fmax_hz}; raise that or end the band there`;
      report('config.impossible', [...at, 'hz'], message);
    }
  }

  for (const part of ['velocity', 'envelope'] as const) {
    const { lines, averages, fmax_hz: fmax } = merged[part];
    const fmaxHz = fmax === 'auto' ? 500 : fmax;
    const recordS = (lines / fmaxHz) * (1 + (averages - 1) / 2);
    if (recordS <= longestRecordS) continue;
    const at = origin((measure) => measure[part]?.lines ?? measure[part]?.averages ?? measure[part]?.fmax_hz);
    const message = `asks for a record of ${Math.round(recordS)} s (lines / fmax_hz × averages), at most ${longestRecordS} s; use fewer lines or averages`;
    report('config.impossible', [...at, part], message);
  }
}
