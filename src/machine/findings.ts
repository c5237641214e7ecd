/** Likely faults of a machine, each with its evidence. */

import { bearingFindings } from './finding-bearing.ts';
import type { Finding, MachineEvidence } from './finding-evidence.ts';
import { flowAndSupplyFindings } from './finding-flow-supply.ts';
import { shaftFindings } from './finding-shaft.ts';

/**
 * The likely faults of a machine, likely ones first.
 *
 * Velocity speaks only where it is worth explaining (`notable`): every machine has some 1×, and a finding on a machine
 * in zone A or B would be crying wolf. Bearing defects are told in any zone. Nothing is named from a figure that was
 * not measured. Resonance is not named: it takes a run-up or coast-down, which single readings are not.
 *
 * @param evidence one machine's latest figures, RMS in mm/s.
 * @returns none where there is nothing worth saying. Never throws.
 *
 * Sources and worked numbers: with each group of rules.
 */
export function findingsFor(evidence: MachineEvidence): Finding[] {
  const found = [
    ...bearingFindings(evidence.points),
    ...shaftFindings(evidence.points),
    ...flowAndSupplyFindings(evidence),
  ];
  return merge(found).sort(likelyFirst);
}

function likelyFirst(a: Finding, b: Finding): number {
  return Number(b.likelihood === 'likely') - Number(a.likelihood === 'likely');
}

/** Motor and pump may show the same fault: one finding, with the points and the evidence of both. */
function merge(findings: readonly Finding[]): Finding[] {
  const merged = new Map<string, Finding>();
  for (const finding of findings) {
    const same = merged.get(finding.fault);
    merged.set(
      finding.fault,
      same === undefined
        ? finding
        : {
            ...finding,
            likelihood: same.likelihood === 'likely' ? 'likely' : finding.likelihood,
            points: [...same.points, ...finding.points],
            evidence: [...new Set([...same.evidence, ...finding.evidence])],
          },
    );
  }
  return [...merged.values()];
}
