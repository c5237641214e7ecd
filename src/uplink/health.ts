import { rounded } from '../signal/rounded.ts';
import type { StoreCounters } from '../store/types.ts';
import type { UplinkStatus } from './uplink.ts';

/** The sections of `health` that tell of the way to the control room. */
export function uplinkHealth(
  status: UplinkStatus,
  counters: StoreCounters,
): Record<'outbox' | 'uplink', object> {
  const { outbox, setAside, dropped, superseded } = counters;
  const latest = setAside.latest;
  return {
    outbox: {
      rows: outbox.rows,
      bytes: outbox.bytes,
      oldest_s: outbox.oldestS === null ? null : rounded(outbox.oldestS),
      by_class: outbox.byClass,
      dropped,
      superseded,
      set_aside: {
        rows: setAside.rows,
        latest: latest === null ? null : { topic: latest.topic, reason: latest.reason },
      },
    },
    uplink: {
      protocol: status.protocol,
      connects: status.connects,
      asks: { ...status.asks },
      oversized: status.oversized,
      bytes_today: Object.fromEntries(
        status.bytesToday.map((line) => [line.class, { sent: line.sentBytes, received: line.receivedBytes }]),
      ),
      left_today: status.leftTodayBytes,
    },
  };
}
