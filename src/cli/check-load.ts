/** What a station's settings load: the serial lines, memory and the uplink. Estimates; each says how it is made. */

import type { ColumnChannel, LinkSettings, Station } from '../config/station.ts';
import { ringBytes } from '../link/ring.ts';
import type { PointPlan } from '../measure/plan.ts';

export interface CheckWarning {
  readonly kind: 'warning';
  /** A point, machine, link or rule. */
  readonly where: string;
  readonly text: string;
}

export interface CheckedLink {
  readonly kind: 'link';
  readonly link: string;
  readonly format: 'frames' | 'columns';
  readonly rate_hz: number | null;
  readonly channels: number | null;
  /** null: known when the node speaks. With frames: 16 bit, and 24 bit beside it. */
  readonly bytes_per_s: number | null;
  readonly bytes_per_s_24_bit: number | null;
  /** 8N1: a tenth of the baud rate; null: not a serial line. */
  readonly line_bytes_per_s: number | null;
  readonly share_pct: number | null;
  /** Shared memory of the ring of raw counts; null: known when the node speaks. */
  readonly ring_bytes: number | null;
}

export interface CheckedUplink {
  readonly kind: 'uplink';
  /** A quiet station: every point at `publish.at_least_s`. */
  readonly quiet_bytes_per_day: number;
  /** A restless one: every point at `publish.min_interval_s`, before the ceiling. */
  readonly busy_bytes_per_day: number;
  readonly ceiling_bytes_per_day: number;
  readonly method: string;
}

/** Version, kind, node, counter, index, n and CRC of a SAMPLES frame, and its delimiter. */
const frameOverheadBytes = 8 + 10 + 4 + 1;
/** Nodes send frames of about this many bytes of samples (common practice, no source). */
const framePayloadBytes = 512;
const cobsRun = 254;
/** Eight data bits travel with a start and a stop bit. */
const bitsPerByte = 10;
/** Above this share a line that stutters cannot catch up. */
const fullLinePct = 90;
/** A record is read while the next arrives, and a snapshot keeps 10 s before and 5 s after an event. */
const ringExtraS = 15;
/** A printed number where no range is configured, and the separator after it. */
const digitsUnknown = 7;

const readingBytes = 1150;
const bandBytes = 25;
const stateBytes = 320;
const healthBytes = 1500;
/** Topic, MQTT and TCP/IP headers, TLS record and acknowledgement of one QoS 1 message. */
const messageOverheadBytes = 220;
const pingBytes = 200;
const daySeconds = 86_400;

/** The nominal rate of a link as far as the file tells; null: known when the node speaks. */
export function nominalRateHz(station: Station, linkId: string): number | null {
  const format = station.links.find((link) => link.id === linkId)!.format;
  return format.kind === 'columns' ? format.sampleRateHz : format.expect.sampleRateHz;
}

export function reportLinks(
  station: Station,
  plans: ReadonlyMap<string, PointPlan>,
): { links: CheckedLink[]; warnings: CheckWarning[] } {
  const links = station.links.map((link) => checkLink(link, [...plans.values()]));
  const warnings = links.flatMap((link) => linkWarnings(link));
  return { links, warnings };
}

function checkLink(link: LinkSettings, plans: readonly PointPlan[]): CheckedLink {
  const { format, transport } = link;
  const rateHz = format.kind === 'columns' ? format.sampleRateHz : format.expect.sampleRateHz;
  const channels =
    format.kind === 'columns' ? format.channels.length : (format.expect.channels?.length ?? null);
  const known = rateHz !== null && channels !== null;
  const framed = (bytes: number) => (known ? Math.round(framedBytesPerS(rateHz, channels, bytes)) : null);
  const bytesPerS = format.kind === 'columns' ? Math.round(rateHz! * lineBytes(format.channels)) : framed(2);
  const lineBytesPerS = transport.kind === 'serial' ? transport.baud / bitsPerByte : null;
  const records = plans.filter((plan) => plan.point.link === link.id).map((plan) => plan.recordSamples);
  return {
    kind: 'link',
    link: link.id,
    format: format.kind,
    rate_hz: rateHz,
    channels,
    bytes_per_s: bytesPerS,
    bytes_per_s_24_bit: format.kind === 'frames' ? framed(3) : null,
    line_bytes_per_s: lineBytesPerS,
    share_pct: bytesPerS === null || lineBytesPerS === null ? null : (100 * bytesPerS) / lineBytesPerS,
    ring_bytes: known ? ringBytes(channels, Math.ceil(Math.max(0, ...records) + ringExtraS * rateHz)) : null,
  };
}

function framedBytesPerS(rateHz: number, channels: number, bytesPerCount: number): number {
  const perSample = channels * bytesPerCount;
  const samples = Math.max(1, Math.floor(framePayloadBytes / perSample));
  const decoded = samples * perSample + frameOverheadBytes - 1;
  return (rateHz / samples) * (decoded + Math.ceil(decoded / cobsRun) + 1);
}

/** Numbers as wide as their range, a separator or line end after each. */
function lineBytes(channels: readonly ColumnChannel[]): number {
  const columns = Math.max(...channels.map((channel) => channel.column)) + 1;
  const widths = channels.map(({ range, decimals }) => {
    if (range === null) return digitsUnknown + (decimals > 0 ? 1 : 0);
    const [low, high] = range;
    const digits = Math.max(...[low, high].map((edge) => `${Math.trunc(Math.abs(edge))}`.length));
    return digits + (low < 0 ? 1 : 0) + (decimals > 0 ? decimals + 1 : 0);
  });
  const others = (columns - channels.length) * digitsUnknown;
  return widths.reduce((sum, width) => sum + width, others) + columns;
}

function linkWarnings(link: CheckedLink): CheckWarning[] {
  const { share_pct: sharePct, line_bytes_per_s: line, bytes_per_s_24_bit: wide, bytes_per_s: bytes } = link;
  const warn = (text: string): CheckWarning[] => [{ kind: 'warning', where: `link ${link.link}`, text }];
  if (sharePct === null || line === null) return [];
  if (sharePct > fullLinePct) {
    return warn(
      `too slow: ${bytes} bytes/s are ${sharePct.toFixed(0)} % of what the line carries (${line} bytes/s)`,
    );
  }
  const widePct = (100 * (wide ?? 0)) / line;
  return widePct > fullLinePct
    ? warn(
        `too slow if the node sends 24 bit: ${wide} bytes/s are ${widePct.toFixed(0)} % of what the line carries`,
      )
    : [];
}

export function reportUplink(station: Station): { uplink: CheckedUplink; warnings: CheckWarning[] } {
  const points = station.machines.flatMap((machine) => machine.points);
  const keepaliveS = station.broker.kind === 'remote' ? station.broker.keepaliveS : daySeconds;
  const fixed =
    station.machines.length * 24 * (stateBytes + messageOverheadBytes) +
    4 * (healthBytes + messageOverheadBytes) +
    (daySeconds / keepaliveS) * pingBytes;
  const readingsEvery = (intervalS: number) =>
    points.reduce((sum, point) => {
      const bytes = readingBytes + bandBytes * point.measure.bands.length + messageOverheadBytes;
      return sum + (daySeconds / Math.max(intervalS, point.measure.everyS)) * bytes;
    }, 0);
  const { minIntervalS, atLeastS } = station.publish;
  const uplink: CheckedUplink = {
    kind: 'uplink',
    quiet_bytes_per_day: Math.round(fixed + readingsEvery(Math.max(atLeastS, minIntervalS))),
    busy_bytes_per_day: Math.round(fixed + readingsEvery(minIntervalS)),
    ceiling_bytes_per_day: station.broker.bytesPerDay,
    method:
      `readings of ${readingBytes} bytes and ${bandBytes} a band at publish.at_least_s (quiet) or ` +
      `publish.min_interval_s (busy), machine state hourly, health every 6 h, keepalive; ` +
      `${messageOverheadBytes} bytes a message for MQTT, TCP and TLS; alarms and snapshots not counted`,
  };
  const quiet = uplink.quiet_bytes_per_day;
  const warnings: CheckWarning[] =
    quiet > uplink.ceiling_bytes_per_day
      ? [
          {
            kind: 'warning',
            where: 'uplink',
            text: `even a quiet day takes ${quiet} bytes, above bytes_per_day ${uplink.ceiling_bytes_per_day}: readings will be held back`,
          },
        ]
      : [];
  return { uplink, warnings };
}
