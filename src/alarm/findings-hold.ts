/**
 * Likely faults told only when they persist: one odd evaluation must not make a message. Where no reading of the machine
 * counts (stopped, starting, nothing valid) an evaluation says nothing of its faults, and what stands is held.
 */

import type { Finding } from '../machine/finding-evidence.ts';
import type { AlarmInput } from './effects.ts';
import type { FindingsRow, PointRow } from './state.ts';
import type { StepWork } from './work.ts';

/** It must show in 3 of the last 5 evaluations to appear, and in none of them to go. Common practice, no source. */
const SHOWN = 3;
const KEPT = 5;

export function onFindings(
  work: StepWork,
  { machineId, findings }: Extract<AlarmInput, { kind: 'findings' }>,
): void {
  const machine = work.plan.machines.get(machineId)?.machine;
  if (machine === undefined) throw new RangeError(`no machine ${machineId} in this station`);
  if (!machine.points.some(({ key }) => isJudged(work.point(key)))) return;
  const row = work.machine(machineId);
  const next = holdFindings(row.findings, findings);
  work.setMachine(machineId, { ...row, findings: next }, false);
  work.touched.add(machineId);
  if (describe(next.standing) === describe(row.findings.standing)) return;
  const payload = { id: work.allocateId(), t: work.t, findings: next.standing };
  work.effects.push({ kind: 'publish', class: 'finding', topic: `${machineId}/finding`, payload });
}

/** Whether the latest reading of a point counts and has figures. */
function isJudged({ running, startedS, uncountedS, invalid }: PointRow): boolean {
  return running === true && startedS === null && uncountedS === 0 && invalid === 0;
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
