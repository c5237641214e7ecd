/** The frequencies that a report marks and names in its spectra. */

import { expectedHz, type LineName, lineNames, lineTitles } from '../measure/bearing-lines.ts';
import type { PlannedBearing } from '../measure/plan.ts';
import type { EnvelopeReading } from '../measure/reading.ts';

type MarkFamily = 'shaft' | 'vanes' | 'mains' | 'outer' | 'inner' | 'rolling-element' | 'cage';

export interface Mark {
  readonly hz: number;
  /** As `2 BPFO` or `BPFI − 1x`. */
  readonly name: string;
  readonly family: MarkFamily;
  readonly kind: 'main' | 'harmonic' | 'sideband';
  /** Bearing that it belongs to; none: the machine's. */
  readonly bearing?: string;
  /** false: reckoned from geometry and speed, no line stands there. */
  readonly found?: boolean;
}

const SHAFT_ORDERS = 10;
const ENVELOPE_SHAFT_ORDERS = 3;
const BEARING_HARMONICS = 5;
/** Sidebands on either side of the fundamental and its first harmonics. */
const SIDEBANDS = 2;
const SIDEBAND_TEETH = 3;

const FAMILY: Readonly<Record<LineName, MarkFamily>> = {
  bpfo: 'outer',
  bpfi: 'inner',
  bsf: 'rolling-element',
  ftf: 'cage',
};

interface MachineRates {
  /** null: unknown; then only what does not turn with the shaft is marked. */
  readonly shaftHz: number | null;
  readonly vanes: number | null;
  readonly mainsHz: number;
  readonly supply: 'mains' | 'inverter' | null;
}

/** Shaft harmonics, vane pass and twice mains up to `topHz`. */
export function machineMarks({ shaftHz, vanes, mainsHz, supply }: MachineRates, topHz: number): Mark[] {
  const marks: Mark[] = [];
  if (shaftHz !== null) {
    marks.push(...shaftMarks(shaftHz, SHAFT_ORDERS));
    for (const k of vanes === null ? [] : [1, 2]) {
      const name = k === 1 ? 'vane pass' : '2 vane pass';
      marks.push({ hz: k * vanes! * shaftHz, name, family: 'vanes', kind: k === 1 ? 'main' : 'harmonic' });
    }
  }
  if (supply !== 'inverter') {
    marks.push({ hz: 2 * mainsHz, name: '2x mains', family: 'mains', kind: 'main' });
  }
  return within(marks, topHz);
}

/**
 * Bearing frequencies with their harmonics, and the sidebands that a defect shows: of the shaft about the inner race's,
 * of the cage about a rolling element's (McFadden and Smith 1984, from memory). Where the reading found a line, its place
 * is taken, else the expected one.
 */
export function envelopeMarks(
  bearings: readonly PlannedBearing[],
  envelope: EnvelopeReading,
  shaftHz: number | null,
  topHz: number,
): Mark[] {
  if (shaftHz === null) return [];
  const marks = shaftMarks(shaftHz, ENVELOPE_SHAFT_ORDERS);
  for (const { id, multiples } of bearings) {
    if (multiples === null) continue;
    const expected = expectedHz(multiples, shaftHz);
    const foundHz = (name: LineName) => (envelope.bearing === id ? (envelope[name]?.hz ?? null) : null);
    for (const name of lineNames) {
      const hz = foundHz(name) ?? expected[name];
      const common = { family: FAMILY[name], bearing: id, found: foundHz(name) !== null };
      const sides = sidebandsOf(name, { shaftHz, cageHz: foundHz('ftf') ?? expected.ftf });
      for (let k = 1; k <= BEARING_HARMONICS; k++) {
        const title = k === 1 ? lineTitles[name] : `${k} ${lineTitles[name]}`;
        marks.push({ ...common, hz: k * hz, name: title, kind: k === 1 ? 'main' : 'harmonic' });
        if (sides === null || k > SIDEBAND_TEETH) continue;
        for (let n = 1; n <= SIDEBANDS; n++) {
          const side = { ...common, kind: 'sideband' } as const;
          marks.push({ ...side, hz: k * hz - n * sides.hz, name: `${title} − ${n}${sides.name}` });
          marks.push({ ...side, hz: k * hz + n * sides.hz, name: `${title} + ${n}${sides.name}` });
        }
      }
    }
  }
  return within(marks, topHz);
}

function sidebandsOf(
  name: LineName,
  { shaftHz, cageHz }: { shaftHz: number; cageHz: number },
): { hz: number; name: string } | null {
  if (name === 'bpfi') return { hz: shaftHz, name: 'x' };
  if (name === 'bsf') return { hz: cageHz, name: ' FTF' };
  return null;
}

function shaftMarks(shaftHz: number, orders: number): Mark[] {
  return Array.from({ length: orders }, (_, k) => ({
    hz: (k + 1) * shaftHz,
    name: `${k + 1}x`,
    family: 'shaft' as const,
    kind: k === 0 ? ('main' as const) : ('harmonic' as const),
  }));
}

function within(marks: readonly Mark[], topHz: number): Mark[] {
  return marks.filter(({ hz }) => hz > 0 && hz <= topHz).sort((a, b) => a.hz - b.hz);
}
