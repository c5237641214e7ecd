/** The report of `check` for a person. */

import type { CheckedLink, CheckedUplink } from './check-load.ts';
import { type CheckedPoint, figure } from './check-report.ts';

const unknown = 'known when the node speaks';

export function linkText(link: CheckedLink): string {
  const rate =
    link.rate_hz === null || link.channels === null
      ? unknown
      : `${link.channels} x ${figure(link.rate_hz)} Hz, ${figure(link.bytes_per_s! / 1000)} kB/s`;
  const share = link.share_pct === null ? '' : `, ${link.share_pct.toFixed(0)} % of the line`;
  const ring = link.ring_bytes === null ? '' : `, ring ${figure(link.ring_bytes / 1e6)} MB`;
  return `link ${link.link}: ${link.format}, ${rate}${share}${ring}`;
}

export function pointText(point: CheckedPoint): string {
  const rows = [
    ['rate', rateText(point)],
    [
      'velocity',
      `Fmax ${figure(point.fmax_hz)} Hz, ${point.lines} lines of ${figure(point.line_hz)} Hz` +
        (point.overall_hz ? `, overall ${point.overall_hz.map(figure).join(' to ')} Hz` : ''),
    ],
    ['envelope', envelopeText(point)],
    ['shaft', shaftText(point)],
    ...point.bearings.map(({ id, certain, multiples, hz }) => {
      const rates = hz ?? multiples;
      const unit = hz === null ? ' x shaft' : ' Hz';
      const named = (['bpfo', 'bpfi', 'bsf', 'ftf'] as const).map(
        (name) => `${name.toUpperCase()} ${figure(rates[name])}`,
      );
      return [`bearing ${id}`, `${named.join(', ')}${unit}${certain ? '' : ' (rules of thumb)'}`];
    }),
    ...point.limits.map(({ rule, watch, alert, danger, by }) => {
      const levels = [alert === null ? '' : `alert ${alert}`, danger === null ? '' : `danger ${danger}`];
      return [`alarm ${rule}`, `${watch}: ${levels.filter(Boolean).join(', ')} (${by})`];
    }),
    ['zones', point.no_zones === null ? '' : `none, ${point.no_zones}`],
  ];
  return [
    `point ${point.point}`,
    ...rows.filter(([, text]) => text !== '').map(([name, text]) => `  ${name!.padEnd(18)} ${text}`),
  ].join('\n');
}

function rateText(point: CheckedPoint): string {
  if (point.rate_hz === null) return `${unknown}; a record every ${figure(point.every_s)} s`;
  const record = `record ${figure(point.record_s!)} s every ${figure(point.every_s)} s`;
  const judged =
    point.judged_after_start_s === null
      ? ''
      : `, first alarm ${figure(point.judged_after_start_s)} s after a start`;
  return `${figure(point.rate_hz)} Hz, decimated by ${point.decimation} to ${figure(point.decimated_hz!)} Hz, ${record}${judged}`;
}

function envelopeText(point: CheckedPoint): string {
  if (point.envelope === null) return point.rate_hz === null ? '' : 'none';
  const { band_hz: band, fmax_hz: fmax, lines, line_hz: line } = point.envelope;
  return `${band.map(figure).join(' to ')} Hz, Fmax ${figure(fmax)} Hz, ${lines} lines of ${figure(line)} Hz`;
}

function shaftText(point: CheckedPoint): string {
  if (point.shaft_hz === null) return 'speed known when it runs';
  const vanes = point.vane_pass_hz === null ? '' : `, vane pass ${figure(point.vane_pass_hz)} Hz`;
  return `${figure(point.shaft_hz)} Hz (${figure(point.shaft_hz * 60)} r/min)${vanes}`;
}

export function uplinkText(uplink: CheckedUplink): string {
  const mb = (bytes: number) => `${figure(bytes / 1e6)} MB`;
  return [
    `uplink: ${mb(uplink.quiet_bytes_per_day)} on a quiet day, ${mb(uplink.busy_bytes_per_day)} on a restless one, ceiling ${mb(uplink.ceiling_bytes_per_day)}`,
    `  estimate: ${uplink.method}`,
  ].join('\n');
}
