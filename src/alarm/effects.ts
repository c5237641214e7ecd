/** What goes into a step of the alarm engine, and what comes out. */

import type { Level } from '../config/station.ts';
import type { Finding } from '../machine/finding-evidence.ts';
import type { Reading } from '../measure/reading.ts';
import type { Baseline } from './baseline.ts';
import type { AlarmPayload, FindingPayload, MachineStatePayload } from './payload.ts';
import type { TrendSample } from './rise.ts';
import type { GatewayCondition, LinkCondition } from './sensor.ts';
import type { AlarmRow, MachineRow, PointRow, QuietRow } from './state.ts';

/** `t` is always a label (ISO 8601, wall time as it stands); durations come as `elapsedS`. */
export type AlarmInput =
  | {
      readonly kind: 'reading';
      readonly pointKey: string;
      readonly reading: Reading;
      readonly t: string;
      /** Sample time since this point's previous reading; null: unknown (first one, node restarted). */
      readonly elapsedS: number | null;
      readonly baseline?: Baseline | null;
    }
  /** The trend of a point's figure under a `rise` rule, an hour or so after the last. */
  | {
      readonly kind: 'trend';
      readonly alarm: string;
      readonly samples: readonly TrendSample[];
      readonly t: string;
    }
  /** All conditions of a link that hold at present; none: it is well. */
  | {
      readonly kind: 'link';
      readonly link: string;
      readonly conditions: readonly LinkCondition[];
      readonly detail: string | null;
      readonly t: string;
    }
  | {
      readonly kind: 'gateway';
      readonly condition: GatewayCondition;
      readonly holds: boolean;
      readonly detail: string | null;
      readonly t: string;
    }
  /** The monotonic clock of the station, or sample time in a replay: without it nothing that waits is ever told. */
  | { readonly kind: 'tick'; readonly elapsedS: number; readonly t: string }
  | {
      readonly kind: 'findings';
      readonly machineId: string;
      readonly findings: readonly Finding[];
      readonly t: string;
    }
  | AskInput;

export type AskInput =
  | {
      readonly kind: 'acknowledge';
      readonly alarm: string;
      readonly raised?: string;
      readonly by: string;
      readonly t: string;
    }
  | {
      readonly kind: 'shelve';
      readonly alarm: string;
      readonly minutes: number;
      readonly by: string;
      readonly t: string;
    }
  | { readonly kind: 'unshelve'; readonly alarm: string; readonly by: string; readonly t: string }
  | {
      readonly kind: 'out-of-service' | 'in-service';
      /** Key of an alarm, a point (`pump-1/motor-de-h`) or a machine. */
      readonly target: string;
      readonly by: string;
      readonly why: string;
      readonly t: string;
    }
  | { readonly kind: 'reset'; readonly alarm: string; readonly by: string; readonly t: string }
  | { readonly kind: 'test'; readonly alarm: string; readonly level: Level; readonly t: string };

/** One change of one alarm, whether or not it is published at once. */
export interface AlarmJournalEntry {
  readonly kind: 'alarm';
  readonly id: string;
  readonly t: string;
  /** `pump-1/motor-de-h.zone`. */
  readonly key: string;
  readonly payload: AlarmPayload;
  /** The reading that caused it; null: none did. */
  readonly reading: Reading | null;
}

export type AlarmEffect =
  | {
      readonly kind: 'publish';
      readonly class: 'alarm';
      readonly topic: string;
      readonly payload: AlarmPayload;
    }
  | {
      readonly kind: 'publish';
      readonly class: 'state';
      readonly topic: string;
      readonly payload: MachineStatePayload;
    }
  | {
      readonly kind: 'publish';
      readonly class: 'finding';
      readonly topic: string;
      readonly payload: FindingPayload;
    }
  /** Empty the retained topic: what it was about has left the configuration. */
  | { readonly kind: 'withdraw'; readonly topic: string }
  | { readonly kind: 'journal'; readonly entry: AlarmJournalEntry }
  /** A row to keep; `urgent` ones belong in the transaction of this step, others may wait for the next. */
  | { readonly kind: 'row'; readonly key: string; readonly row: StoredRow | null; readonly urgent: boolean }
  /** A reading is over a limit for the first time, the alarm came of it, or it passed off: for evidence to be kept. */
  | {
      readonly kind: 'evidence';
      readonly alarm: string;
      readonly pointKey: string;
      readonly what: 'begin' | 'keep' | 'drop';
    }
  | { readonly kind: 'answer'; readonly ok: true }
  | { readonly kind: 'answer'; readonly ok: false; readonly error: string };

export type StoredRow =
  | ({ readonly v: number; readonly of: 'alarm' } & AlarmRow)
  | ({ readonly v: number; readonly of: 'point' } & PointRow)
  | ({ readonly v: number; readonly of: 'machine' } & MachineRow)
  | ({ readonly v: number; readonly of: 'quiet' } & QuietRow);

/** Hands out the id of the next message or journal entry: `<store>-<n>`. */
export type AllocateId = () => string;
