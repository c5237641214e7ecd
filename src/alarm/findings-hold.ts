/** Likely faults told only when they persist: one odd evaluation must not make a message. */

import type { Finding } from '../machine/finding-evidence.ts';
import type { AlarmInput } from './effects.ts';
import type { FindingsRow } from './state.ts';
import type { StepWork } from './work.ts';

/** It must show in 3 of the last 5 evaluations to appear, and in none of them to go. Common practice, no source. */
const SHOWN = 3;
const KEPT = 5;

export function onFindings(
  work: StepWork,
  { machineId, findings }: Extract<AlarmInput, { kind: 'findings' }>,
): void {
  if (!work.plan.machines.has(machineId)) throw new RangeError(`no machine ${machineId} in this station`);
  const row = work.machine(machineId);
  const next = holdFindings(row.findings, findings);
  work.setMachine(machineId, { ...row, findings: next }, false);
  work.touched.add(machineId);
  if (describe(next.standing) === describe(row.findings.standing)) return;
  const payload = { id: work.allocateId(), t: work.t, findings: next.standing };
  work.effects.push({ kind: 'publish', class: 'finding', topic: `${machineId}/finding`, payload });
}

function holdFindings(from: FindingsRow, findings: readonly Finding[]): FindingsRow {
  const votes = findings.map(({ fault, likelihood }) => ({ fault, likelihood }));
  const recent = [...from.recent, votes].slice(-KEPT);
  const hits = (fault: string, likely: boolean) =>
    recent.filter((set) => set.some((f) => f.fault === fault && (!likely || f.likelihood === 'likely')))
      .length;
  const appeared = findings.filter(({ fault }) => hits(fault, false) >= SHOWN);
  const stayed = from.standing.filter(
    ({ fault }) => !appeared.some((f) => f.fault === fault) && hits(fault, false) > 0,
  );
  const standing = [...appeared, ...stayed].map((finding): Finding => {
    const was = from.standing.find((f) => f.fault === finding.fault)?.likelihood;
    const likely = hits(finding.fault, true) >= SHOWN || (was === 'likely' && hits(finding.fault, true) > 0);
    return { ...finding, likelihood: likely ? 'likely' : 'possible' };
  });
  standing.sort((a, b) => a.likelihood.localeCompare(b.likelihood) || a.fault.localeCompare(b.fault));
  return recent.every((set) => set.length === 0) ? { recent: [], standing } : { recent, standing };
}

function describe(findings: readonly Finding[]): string {
  return findings.map(({ fault, likelihood }) => `${fault} ${likelihood}`).join(', ');
}
