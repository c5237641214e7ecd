/** The `health` payload: how the agent itself is doing, with every counter that says what was lost. */

import { statfsSync } from 'node:fs';
import type { LinkHealth } from '../link/link-health.ts';
import type { StoreCounters } from '../store/types.ts';
import type { UplinkStatus } from '../uplink/uplink.ts';

export interface HealthSources {
  t: string;
  links: Readonly<Record<string, LinkHealth>>;
  store: StoreCounters;
  uplink: UplinkStatus;
  measuring: {
    waiting: number;
    missed: Readonly<Record<string, number>>;
    skipped: number;
    worker_restarts: number;
    readings_lost: number;
    /** Changes of zone or defect that waited because the point flaps. */
    readings_held: number;
    alarm_inputs_dropped: number;
    told_unreadable: number;
  };
  /** Kept, in the making, lost, given up for room; bytes. */
  snapshots: Readonly<Record<string, number>>;
  /** 99th percentile of the delay of the event loop since the last report, in milliseconds. */
  eventLoopP99Ms: number | null;
  directory: string;
  cpuPct: number | null;
}

export function healthBody(sources: HealthSources): Record<string, unknown> {
  const { store, uplink } = sources;
  return {
    t: sources.t,
    links: Object.fromEntries(Object.entries(sources.links).map(([id, link]) => [id, linkBody(link)])),
    measuring: sources.measuring,
    snapshots: sources.snapshots,
    outbox: {
      rows: store.outbox.rows,
      bytes: store.outbox.bytes,
      oldest_s: store.outbox.oldestS,
      by_class: store.outbox.byClass,
      dropped: store.dropped,
      superseded: store.superseded,
      set_aside: {
        rows: store.setAside.rows,
        latest: store.setAside.latest && {
          topic: store.setAside.latest.topic,
          reason: store.setAside.latest.reason,
        },
      },
    },
    journal: store.journal,
    uplink: {
      protocol: uplink.protocol,
      connects: uplink.connects,
      asks: uplink.asks,
      oversized: uplink.oversized,
      bytes_today: Object.fromEntries(
        uplink.bytesToday.map((line) => [line.class, { sent: line.sentBytes, received: line.receivedBytes }]),
      ),
      left_today: Math.max(0, uplink.leftTodayBytes),
    },
    disk: { free_mb: freeMb(sources.directory) },
    memory: { rss_mb: Math.round(process.memoryUsage.rss() / 1e6) },
    cpu: { pct: sources.cpuPct },
    event_loop: { p99_ms: sources.eventLoopP99Ms },
  };
}

function linkBody(link: LinkHealth): Record<string, unknown> {
  const { node } = link;
  return {
    condition: link.condition.kind,
    why: link.condition.why,
    bytes_per_s: Math.round(link.bytesPerS),
    frames: link.frames,
    errors: Object.fromEntries(Object.entries(link.errors).filter(([, count]) => count > 0)),
    rate: node && {
      nominal_hz: node.nominalRateHz,
      measured_hz: link.measuredRate === null ? null : Number(link.measuredRate.hz.toPrecision(9)),
      ppm: link.measuredRate === null ? null : Math.ceil(link.measuredRate.ppm),
    },
    gaps: link.gaps,
    missing_samples: link.missingSamples,
    over_range: link.overRange,
    restarts: link.restarts,
    unplugged: link.unplugged,
    refused: link.refused,
    silent: link.silent,
    node: node?.node ?? null,
    serial_number: node?.serialNumber ?? null,
    node_health: link.nodeHealth && {
      temperature_c: link.nodeHealth.temperatureC,
      supply_v: link.nodeHealth.supplyV,
      over_range: link.nodeHealth.overRangeSamples,
      lost: link.nodeHealth.lostSamples,
    },
    other_nodes: link.otherNodes.length,
  };
}

function freeMb(directory: string): number | null {
  try {
    const { bavail, bsize } = statfsSync(directory);
    return Math.floor((bavail * bsize) / 1e6);
  } catch {
    return null;
  }
}
