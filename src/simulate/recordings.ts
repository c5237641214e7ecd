/**
 * The recordings of the demo data: one motor of an invented station in the states that an engineer meets. All of
 * it is made here, from seeds; nothing was measured.
 */

import { bearingMultiples } from '../machine/bearing.ts';
import type { DefectSettings } from './bearing.ts';
import type { Curve } from './curve.ts';
import { type MachineSettings, SimulatedMachine } from './machine.ts';
import type { ResonanceSettings } from './resonance.ts';
import { type ChannelSettings, Converter } from './sensor.ts';

export interface DemoRecording {
  readonly id: string;
  /** What is wrong, in a sentence. */
  readonly text: string;
  readonly rateHz: number;
  readonly seconds: number;
  readonly machine: MachineSettings;
}

export interface RenderedRecording {
  readonly channels: readonly ChannelSettings[];
  /** Interleaved by channel. */
  readonly counts: Int32Array;
}

/** The bearing at the motor's drive end, as a station file would state it. */
export const demoBearing = {
  elements: 9,
  geometry: { elementMm: 7.94, pitchMm: 39.04, contactDeg: 0 },
  multiples: null,
} as const;
const ratedRpm = 1480;
const vanes = 6;

const sound = {
  unbalanceMmS: 0.9,
  misalignmentMmS: 0.2,
  harmonicsMmS: 0.2,
  vanePassMmS: 0.35,
  electricalMmS: 0.15,
  flowRmsG: 0.02,
} as const;

interface State {
  readonly id: string;
  readonly text: string;
  readonly sources?: MachineSettings['sources'];
  readonly defect?: Pick<DefectSettings, 'part' | 'impactG'>;
  readonly resonance?: ResonanceSettings;
  readonly speed?: Curve;
  readonly powered?: Curve;
  readonly rateHz?: number;
  readonly seconds?: number;
}

/** At 25.6 kHz and 6 s a recording of three channels keeps to some 500 kB once it is compressed. */
const usualRateHz = 25_600;
const usualSeconds = 6;
const quietResonance: ResonanceSettings = { hz: 210, damping: 0.04, participation: 0.1 };

const states: readonly State[] = [
  { id: 'healthy', text: 'A sound machine.' },
  { id: 'unbalance', text: 'Unbalance of the rotor.', sources: { unbalanceMmS: 6 } },
  { id: 'misalignment', text: 'The coupling is out of line.', sources: { misalignmentMmS: 4.5 } },
  { id: 'looseness', text: 'A foot is loose.', sources: { loosenessMmS: 5 } },
  {
    id: 'resonance',
    text: 'The frame resonates at vane pass, vertically as much as horizontally.',
    resonance: { hz: (vanes * ratedRpm) / 60, damping: 0.012, participation: 0.3 },
  },
  { id: 'electrical', text: 'Uneven air gap: twice the line frequency.', sources: { electricalMmS: 3.5 } },
  { id: 'outer', text: 'Defect of the outer race.', defect: { part: 'outer', impactG: 2 } },
  { id: 'inner', text: 'Defect of the inner race.', defect: { part: 'inner', impactG: 3 } },
  { id: 'roller', text: 'Defect of a rolling element.', defect: { part: 'rolling-element', impactG: 3 } },
  { id: 'cage', text: 'Defect of the cage.', defect: { part: 'cage', impactG: 3 } },
  { id: 'cavitation', text: 'Noise as of cavitation.', sources: { cavitationG: 0.25, vanePassMmS: 0.8 } },
  {
    id: 'coast-down',
    text: 'Switched off after 3 s, it coasts down through a resonance of the base plate at 13 Hz.',
    sources: { unbalanceMmS: 3 },
    resonance: { hz: 13, damping: 0.05, participation: 1 },
    speed: [
      [0, 1],
      [3, 1],
      [7, 0.66],
      [12, 0.34],
      [17, 0.1],
      [19, 0],
    ],
    powered: [
      [0, 1],
      [3, 1],
      [3.001, 0],
    ],
    rateHz: 6400,
    seconds: 20,
  },
];

/** The recordings, in the order of their README. */
export function demoRecordings(): readonly DemoRecording[] {
  const multiples = bearingMultiples(demoBearing);
  if (multiples === null) throw new Error('recordings: the bearing has no geometry');
  return states.map((state, k) => {
    const { speed = 1, powered = 1, defect } = state;
    return {
      id: state.id,
      text: state.text,
      rateHz: state.rateHz ?? usualRateHz,
      seconds: state.seconds ?? usualSeconds,
      machine: {
        seed: 6_000 + k,
        shaft: { mainsHz: 50, poles: 4, ratedRpm, driftPct: 0.05, speed, powered },
        vanes,
        sources: { ...sound, ...state.sources },
        resonance: state.resonance ?? quietResonance,
        defects: defect ? [{ multiples, ...defect }] : [],
        points: ['horizontal', 'vertical', 'axial'],
      },
    };
  });
}

export function renderRecording({ machine, rateHz, seconds }: DemoRecording): RenderedRecording {
  const channels = ['h', 'v', 'a'].map(
    (name): ChannelSettings => ({ name, unit: 'g', unitsPerCount: 2 ** -11, noiseGPerRtHz: 6e-5 }),
  );
  const converter = new Converter(
    { seed: machine.seed, nominalRateHz: rateHz, bits: 16, channels },
    (trueRateHz) => new SimulatedMachine(machine, trueRateHz),
  );
  const samples = Math.round(seconds * rateHz);
  const counts = new Int32Array(samples * channels.length);
  converter.fill(counts, samples);
  return { channels, counts };
}
