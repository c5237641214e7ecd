/** Readings, findings and alarms as lines for a person. */

import type { PrintedLine } from './replay.ts';

function figure(value: unknown, unit: string): string {
  return typeof value === 'number' ? `${value} ${unit}` : 'not measured';
}

function record(value: unknown): Record<string, unknown> {
  return typeof value === 'object' && value !== null ? (value as Record<string, unknown>) : {};
}

function readingText(line: PrintedLine): string {
  const velocity = record(line.velocity);
  const envelope = record(line.envelope);
  const shaft = record(line.shaft);
  const why = Array.isArray(line.why) && line.why.length > 0 ? ` (${line.why.join('; ')})` : '';
  const parts = [
    `velocity ${figure(velocity.overall, 'mm/s')}`,
    `zone ${line.zone ?? '-'}`,
    `shaft ${figure(shaft.hz, 'Hz')}`,
    `defect ${envelope.defect ?? '-'}`,
    `${line.quality}${why}`,
  ];
  return `${line.t} ${line.machine}/${line.point} ${parts.join(', ')}`;
}

function findingText(line: PrintedLine): string {
  const findings = Array.isArray(line.findings) ? line.findings.map(record) : [];
  if (findings.length === 0) return `${line.t} ${line.machine} no likely fault`;
  return findings
    .map(({ fault, likelihood, evidence, check }) => {
      const because = Array.isArray(evidence) ? evidence.join('; ') : '';
      return `${line.t} ${line.machine} ${likelihood} ${fault}: ${because}. ${check}`;
    })
    .join('\n');
}

export function lineFor(line: PrintedLine): string {
  if (line.kind === 'reading') return readingText(line);
  if (line.kind === 'finding') return findingText(line);
  if (line.kind === 'note')
    return `${line.t} ${line.machine} note${line.by === null ? '' : ` by ${line.by}`}: ${line.text}`;
  return `${line.t} ALARM ${line.machine}/${line.alarm} ${line.state} ${line.level ?? ''} ${line.reason}. ${line.check}`;
}
