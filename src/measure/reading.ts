/**
 * A reading: what one record of one point says. The keys are those of the `reading` payload, so that what is
 * judged, journalled, replayed and published is the same thing; `id` and wall times are added when it is sent.
 * A figure that could not be measured is null, with the reason in `why`. Figures are RMS unless the key says
 * otherwise and unrounded here (rounding to four significant digits happens at publication).
 */

import type { Zone } from '../machine/severity.ts';

type Quality = 'good' | 'uncertain' | 'bad';
export type Defect = 'outer' | 'inner' | 'rolling-element' | 'cage' | 'cage-rate';
type RateSource = 'nominal' | 'measured' | 'given';
export type ShaftSpeedSource = 'spectrum' | 'tachometer' | 'mqtt' | 'configured';

/** The sample rate that a record is measured with, and how sure it is. */
export interface RateUsed {
  hz: number;
  source: RateSource;
  /** Standard uncertainty in parts per million; null: nobody knows. */
  ppm: number | null;
}

export interface BearingLine {
  expected_hz: number;
  /** Where the line was found; null: none within reach of the expected place. */
  hz: number | null;
  /** Amplitude of the squared envelope's spectrum at that line, in the unit of the envelope. */
  line: number | null;
  /** 10·log10(line / floor). */
  over_floor_db: number | null;
  /** line / mean of the squared envelope. */
  modulation: number | null;
  /** How many harmonics of it stand above the floor, the fundamental included. */
  harmonics: number;
}

export interface EnvelopeReading {
  unit: 'g²';
  band_hz: [number, number];
  mean: number | null;
  /** Median of the spectrum about the strongest bearing line, or of the whole of it where there is none. */
  floor: number | null;
  /** The bearing part that this one reading accuses. */
  defect: Defect | null;
  /** Of the bearing that `defect` accuses, or of the first bearing of the point. */
  bearing?: string;
  bpfo: BearingLine | null;
  bpfi: BearingLine | null;
  /** The line at twice BSF. */
  bsf: BearingLine | null;
  ftf: BearingLine | null;
}

export interface OrderReading {
  mm_s: number | null;
  deg: number | null;
}

/** A line of the velocity spectrum: where it stands, and its RMS. */
export interface ToneReading {
  hz: number;
  mm_s: number;
}

export interface Reading {
  quality: Quality;
  why: string[];
  first_index: number;
  rate: RateUsed;
  /** null: unknown. */
  running: boolean | null;
  /** Of the shaft at the point; `confidence` 0 to 1 where it was found in the spectrum. */
  shaft: { hz: number | null; source: ShaftSpeedSource | null; confidence?: number };
  /** `unit`, `overall` and one key a configured band. */
  velocity: { unit: 'mm/s'; overall: number | null } & Record<string, number | null | string>;
  displacement: { unit: 'µm'; rms: number | null; p2p: number | null };
  orders: { '1': OrderReading; '2': OrderReading; '3': OrderReading };
  /** Number of vanes × shaft speed, and twice the supply frequency; null: unknown, out of reach or not to be told apart. */
  tones: { vane_pass: ToneReading | null; twice_mains: ToneReading | null };
  acceleration: {
    unit: 'g';
    band_hz: [number, number];
    rms: number | null;
    peak: number | null;
    crest: number | null;
    kurtosis: number | null;
    /** Frequency at which a lone tone would change as fast for its size; it falls when the sensor comes loose. */
    mean_hz: number | null;
  };
  envelope: EnvelopeReading | null;
  zone: Zone | null;
}
