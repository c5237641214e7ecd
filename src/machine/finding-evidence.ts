/** The evidence from which likely faults are named, and what a finding looks like. */

export interface PointEvidence {
  /** Id of the point within its machine. */
  readonly point: string;
  readonly direction: 'horizontal' | 'vertical' | 'axial' | 'inline' | 'cross';
  readonly part: 'motor' | 'pump' | 'gear' | 'fan';
  readonly end: 'de' | 'nde' | null;
  /** Whether the vibration here is worth explaining: zone C or D, or an alarm of its velocity stands. */
  readonly notable: boolean;
  /** RMS in mm/s of the band that severity judges; null: not measured. So for all below. */
  readonly overallMmS: number | null;
  /** RMS at 1×, 2× and 3× shaft speed. */
  readonly ordersMmS: readonly [number | null, number | null, number | null];
  /** RMS from below twice the shaft speed to about ten times it. */
  readonly harmonicsMmS: number | null;
  /** RMS well below shaft speed. */
  readonly lowMmS: number | null;
  /** RMS at twice the supply frequency, where that can be told from the orders of the shaft. */
  readonly twiceMainsMmS: number | null;
  /** RMS at the number of vanes times shaft speed. */
  readonly vanePassMmS: number | null;
  /** What the envelope accuses here; null: nothing. */
  readonly bearing: BearingEvidence | null;
}

export interface BearingEvidence {
  readonly defect: 'outer' | 'inner' | 'rolling-element' | 'cage' | 'cage-rate';
  /** Id of the bearing; null: the point has none by name. */
  readonly bearing: string | null;
  /** Expected and found frequency in Hz, height over the floor (10·log10), line over mean, harmonics seen. */
  readonly expectedHz: number;
  readonly hz: number | null;
  readonly overFloorDb: number | null;
  readonly modulation: number | null;
  readonly harmonics: number;
}

export interface MachineEvidence {
  readonly points: readonly PointEvidence[];
  readonly supply: 'mains' | 'inverter' | null;
  readonly mainsHz: number;
  readonly vanes: number | null;
}

export type FaultName =
  | 'unbalance'
  | 'misalignment'
  | 'looseness'
  | 'electrical'
  | 'vane-pass'
  | 'flow-turbulence'
  | 'bearing-outer'
  | 'bearing-inner'
  | 'bearing-rolling-element'
  | 'bearing-cage';

/** One likely fault, as the `finding` topic lists it. */
export interface Finding {
  readonly fault: FaultName;
  readonly likelihood: 'possible' | 'likely';
  readonly points: readonly string[];
  /** Each a sentence with the figure that speaks for the fault. */
  readonly evidence: readonly string[];
  /** What to look at next. */
  readonly check: string;
}

/** Share in whole percent, for evidence sentences. */
export function percent(part: number, whole: number): string {
  return `${Math.round((100 * part) / whole)} %`;
}

/** Where a person would go near the machine. */
export const CAUTION =
  'Isolate and lock it by the local procedure first; leave opening it to qualified people.';
