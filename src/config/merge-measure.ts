/** Measuring settings of the station, a machine and a point, laid over each other key by key. */

import type { z } from 'zod';
import type { Loose } from './schema.ts';
import { stationMeasure } from './schema-measure.ts';

export type MeasureInFile = z.output<typeof stationMeasure>;

const defaults: MeasureInFile = stationMeasure.parse({});

/** Later layers win; bands are replaced as a whole. */
export function mergeMeasure(layers: readonly (Loose<MeasureInFile> | undefined)[]): MeasureInFile {
  return layers.reduce<MeasureInFile>(
    (merged, layer) => ({
      every_s: layer?.every_s ?? merged.every_s,
      velocity: overlay(merged.velocity, layer?.velocity),
      bands: (layer?.bands as MeasureInFile['bands'] | undefined) ?? merged.bands,
      envelope: overlay(merged.envelope, layer?.envelope as Partial<MeasureInFile['envelope']> | undefined),
    }),
    defaults,
  );
}

function overlay<T extends object>(
  below: T,
  above: { [Key in keyof T]?: T[Key] | undefined } | undefined,
): T {
  return { ...below, ...(above as Partial<T> | undefined) };
}
