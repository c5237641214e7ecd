/**
 * Machines with sound bearings and everything else wrong must not be accused: at most 5 per 1000 of each kind. The
 * longer form is `node scripts/score-negatives.mjs 2000`.
 */
import { describe, expect, it } from 'vitest';
import { measureEnvelope } from '../../src/measure/envelope.ts';
import { type HealthyKind, healthyKinds, healthyRecord } from '../support/healthy-machines.ts';
import { planOf } from './bench.ts';

const perKind = Number(process.env.FOREBAY_NEGATIVES ?? 500);

function accusations(kind: HealthyKind): string[] {
  const found: string[] = [];
  for (let seed = 1; seed <= perKind; seed++) {
    const { rateHz, shaftHz, mainsHz, rates, otherHz, accelerationG } = healthyRecord(kind, seed);
    const bearing = { id: 'sound', elements: null, geometry: null, multiples: rates };
    const plan = planOf({
      rateHz,
      mainsHz,
      point: { bearings: [bearing] },
      machine: { shaft: { kind: 'fixed', rpm: 60 * shaftHz, tolerancePct: 0 } },
    });
    const others = otherHz === null ? [] : [otherHz];
    const { reading } = measureEnvelope(plan, accelerationG, rateHz, shaftHz, others);
    if (reading === null) throw new Error(`${kind}, seed ${seed}: not measured`);
    if (reading.defect !== null) found.push(`${reading.defect} (seed ${seed})`);
  }
  return found;
}

describe(`${perKind} machines of each kind with sound bearings`, () => {
  it.each(healthyKinds)(
    '%s: at most 5 in 1000 are accused',
    (kind) => {
      const found = accusations(kind);
      console.log(`negatives: ${kind}: ${found.length} of ${perKind} accused ${found.join(', ')}`);
      expect(found.length).toBeLessThanOrEqual(Math.floor((5 * perKind) / 1000));
    },
    perKind * 1000,
  );
});
