/** Bearings that can be built. */

import { bearingMultiples } from '../machine/bearing.ts';
import { checkIds, checkOneOf } from './check-ids.ts';
import type { Report } from './issues.ts';
import type { LooseStationFile } from './schema.ts';
import type { KeyPath } from './yaml-text.ts';

type LooseMachine = NonNullable<NonNullable<LooseStationFile['machines']>[number]>;
type LooseBearing = NonNullable<NonNullable<LooseMachine['bearings']>[number]>;

/** A published multiple carries three figures; their sums may be off by this. */
const sumTolerance = 0.05;
const cageTolerance = 0.006;

export function checkBearings(machine: LooseMachine, path: KeyPath, report: Report): void {
  checkIds(machine.bearings, [...path, 'bearings'], 'bearing', {}, report);
  for (const [index, bearing] of (machine.bearings ?? []).entries()) {
    if (bearing) checkBearing(bearing, [...path, 'bearings', index], report);
  }
}

function checkBearing(bearing: LooseBearing, path: KeyPath, report: Report): void {
  if (bearing.multiples !== undefined) {
    for (const key of ['element_mm', 'pitch_mm', 'contact_deg'] as const) {
      checkOneOf(bearing, ['multiples', key], path, false, report);
    }
    checkMultiples(bearing.multiples, bearing.elements, [...path, 'multiples'], report);
    return;
  }
  if (bearing.elements === undefined) {
    const message = 'knows neither elements nor multiples, give the number of rolling elements at least';
    report('config.missing-key', [...path, 'elements'], message, [
      [...path, 'elements'],
      [...path, 'multiples'],
    ]);
  }
  const { element_mm: elementMm, pitch_mm: pitchMm } = bearing;
  if ((elementMm === undefined) !== (pitchMm === undefined)) {
    const [there, absent] = elementMm === undefined ? ['pitch_mm', 'element_mm'] : ['element_mm', 'pitch_mm'];
    report('config.missing-key', [...path, absent!], `is missing, ${there} needs it beside it`);
  }
  if (bearing.contact_deg !== undefined && elementMm === undefined && pitchMm === undefined) {
    report('config.missing-key', [...path, 'pitch_mm'], 'is missing, contact_deg needs it and element_mm', [
      [...path, 'pitch_mm'],
      [...path, 'element_mm'],
    ]);
  }
  if (elementMm === undefined || pitchMm === undefined) return;
  if (elementMm >= pitchMm) {
    const message = `is ${elementMm} mm, a rolling element is smaller than its pitch circle of ${pitchMm} mm`;
    report('config.impossible', [...path, 'element_mm'], message);
    return;
  }
  try {
    const geometry = { elementMm, pitchMm, contactDeg: bearing.contact_deg ?? 0 };
    bearingMultiples({ elements: bearing.elements ?? 3, geometry, multiples: null });
  } catch (error) {
    const message = `${(error as Error).message}, check elements, element_mm and pitch_mm (in mm, not inches)`;
    report('config.impossible', [...path, 'elements'], message);
  }
}

/** BPFO + BPFI = n and BPFO = n·FTF; see src/machine/bearing.ts. */
function checkMultiples(
  multiples: NonNullable<LooseBearing['multiples']>,
  elements: number | undefined,
  path: KeyPath,
  report: Report,
): void {
  const { ftf, bsf, bpfo, bpfi } = multiples;
  if (bpfo !== undefined && bpfi !== undefined) {
    const sum = bpfo + bpfi;
    const count = elements ?? Math.round(sum);
    if (bpfo >= bpfi) {
      const message = `is ${bpfo}, an outer race passes fewer elements than the inner (${bpfi}); are they swapped?`;
      report('config.impossible', [...path, 'bpfo'], message);
    } else if (Math.abs(sum - count) > sumTolerance) {
      const wanted = elements === undefined ? 'a whole number' : `${elements}`;
      const message = `bpfo + bpfi is ${sum.toFixed(3)}, it must be the number of rolling elements, ${wanted}`;
      report('config.impossible', path, message);
    } else if (ftf !== undefined && Math.abs(ftf - bpfo / count) > cageTolerance) {
      const message = `is ${ftf}, with ${count} elements and bpfo ${bpfo} it must be ${(bpfo / count).toFixed(3)}`;
      report('config.impossible', [...path, 'ftf'], message);
      return;
    }
  }
  // BSF is greatest at a contact angle of 0, where it is (1 − r²)/2r with r = 1 − 2·FTF.
  const ratio = ftf === undefined ? 0 : 1 - 2 * ftf;
  if (bsf !== undefined && ratio > 0.05 && bsf > 1.5 * ((1 - ratio * ratio) / (2 * ratio))) {
    const message = `is ${bsf}, too much for this cage rate; give one spin of the element and not twice that`;
    report('config.impossible', [...path, 'bsf'], message);
  }
}
