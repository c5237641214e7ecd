import { describe, expect, it } from 'vitest';
import { type MachineSettings, SimulatedMachine } from '../../src/simulate/machine.ts';
import { lineAt, peakGOf, rms, strongestBetween } from './dft.ts';

const rateHz = 5120;
const shaft = { mainsHz: 50, poles: 4, ratedRpm: 1480 };
const ratedHz = 1480 / 60;

function settings(change: Partial<MachineSettings>): MachineSettings {
  return { seed: 11, shaft, vanes: 6, sources: {}, points: ['horizontal'], ...change };
}

function render(machineSettings: MachineSettings, seconds: number, rate = rateHz): Float64Array[] {
  const n = Math.round(seconds * rate);
  const out = machineSettings.points.map(() => new Float64Array(n));
  new SimulatedMachine(machineSettings, rate).fill(out, n);
  return out;
}

const everything: MachineSettings = settings({
  shaft: { ...shaft, driftPct: 0.3 },
  sources: {
    unbalanceMmS: 1,
    misalignmentMmS: [
      [0, 0],
      [1, 1],
    ],
    loosenessMmS: 0.5,
    harmonicsMmS: 0.3,
    vanePassMmS: 0.4,
    electricalMmS: 0.2,
    flowRmsG: 0.02,
    cavitationG: 0.01,
  },
  resonance: { hz: 140, damping: 0.03, participation: 0.2 },
  defects: [
    { multiples: { ftf: 0.4, bsf: 2.36, bpfo: 3.585, bpfi: 5.415 }, part: 'inner', impactG: 1 },
    { multiples: { ftf: 0.4, bsf: 2.36, bpfo: 3.585, bpfi: 5.415 }, part: 'rolling-element', impactG: 1 },
  ],
  points: ['horizontal', 'vertical', 'axial', 'mark'],
});

describe('a simulated machine', () => {
  it('is the same for the same seed, and another for another', () => {
    const [once] = render(everything, 1);
    expect(render(everything, 1)[0]).toEqual(once);
    expect(render({ ...everything, seed: 12 }, 1)[0]).not.toEqual(once);
  });

  it('gives the same samples in whatever portions they are taken', () => {
    const n = 6000;
    const whole = render(everything, n / rateHz);
    const machine = new SimulatedMachine(everything, rateHz);
    const parts = whole.map(() => new Float64Array(n));
    const portions = [1, 2, 63, 64, 65, 127, 1000, 7];
    for (let done = 0, k = 0; done < n; k++) {
      const take = Math.min(portions[k % portions.length]!, n - done);
      machine.fill(
        parts.map((part) => part.subarray(done)),
        take,
      );
      done += take;
    }
    expect(rms(whole[0]!)).toBeGreaterThan(0.05);
    for (let point = 0; point < whole.length; point++) expect(parts[point]).toEqual(whole[point]);
  });

  it('turns below synchronous speed (120·f/poles) and refuses to turn at it', () => {
    expect(() => render(settings({ shaft: { ...shaft, ratedRpm: 1500 } }), 1)).toThrow(/below 1500 r\/min/);
  });

  it('shows an unbalance of 2 mm/s as a line at the shaft speed, of that velocity', () => {
    const [h] = render(settings({ sources: { unbalanceMmS: 2 } }), 8);
    expect(strongestBetween(h!, rateHz, 20, 30, 0.05)).toBeCloseTo(ratedHz, 1);
    expect(lineAt(h!, rateHz, ratedHz).amplitude / peakGOf(2, ratedHz)).toBeCloseTo(1, 3);
    expect(lineAt(h!, rateHz, 2 * ratedHz).amplitude).toBeLessThan(1e-6);
  });

  it('lets the acceleration of an unbalance grow with speed squared (m·e·ω²)', () => {
    const at = (speed: number) => {
      const [h] = render(settings({ shaft: { ...shaft, speed }, sources: { unbalanceMmS: 2 } }), 8);
      return lineAt(h!, rateHz, speed * ratedHz).amplitude;
    };
    expect(at(0.5) / at(1)).toBeCloseTo(0.25, 3);
    expect(at(0.8) / at(1)).toBeCloseTo(0.64, 3);
  });

  it('lets an unbalance pass the vertical a quarter turn after the horizontal', () => {
    const points: MachineSettings['points'] = ['horizontal', 'vertical'];
    const [h, v] = render(settings({ sources: { unbalanceMmS: 2 }, points }), 8);
    const lead = lineAt(h!, rateHz, ratedHz).phaseRad - lineAt(v!, rateHz, ratedHz).phaseRad;
    expect((lead + 2 * Math.PI) % (2 * Math.PI)).toBeCloseTo(Math.PI / 2, 2);
  });

  it('shows misalignment at 2x above 1x and strongly along the shaft (common practice, no source)', () => {
    const points: MachineSettings['points'] = ['horizontal', 'axial'];
    const [h, a] = render(settings({ sources: { misalignmentMmS: 1 }, points }), 8);
    const velocity = (x: Float64Array, order: number) => lineAt(x, rateHz, order * ratedHz).amplitude / order;
    expect(velocity(h!, 2)).toBeGreaterThan(velocity(h!, 1));
    expect(velocity(a!, 2)).toBeGreaterThan(0.5 * velocity(h!, 2));
  });

  it('shows looseness as many harmonics and half orders, whose velocities add up to the figure', () => {
    const [v] = render(settings({ sources: { loosenessMmS: 3 }, points: ['vertical'] }), 8);
    const velocities = Array.from({ length: 20 }, (_, k) => {
      const hz = ((k + 1) / 2) * ratedHz;
      return lineAt(v!, rateHz, hz).amplitude / peakGOf(1, hz);
    });
    expect(velocities.every((mmS) => mmS > 0.1)).toBe(true);
    expect(Math.hypot(...velocities)).toBeCloseTo(3, 2);
  });

  it('shows vane pass at vanes × speed', () => {
    const [h] = render(settings({ sources: { vanePassMmS: 1 } }), 8);
    expect(strongestBetween(h!, rateHz, 100, 200, 0.1)).toBeCloseTo(6 * ratedHz, 1);
    expect(lineAt(h!, rateHz, 6 * ratedHz).amplitude / peakGOf(1, 6 * ratedHz)).toBeCloseTo(1, 3);
  });

  it('shows the magnetic pull at 100 Hz with sidebands at the pole pass frequency, gone with the power', () => {
    // 4 poles at 1480 r/min on 50 Hz: slip 20 r/min, pole pass 4/3 Hz (published worked example).
    const powered: MachineSettings['shaft']['powered'] = [
      [0, 1],
      [16, 1],
      [16.001, 0],
      [32, 0],
    ];
    const [h] = render(settings({ shaft: { ...shaft, powered }, sources: { electricalMmS: 0.5 } }), 32);
    const on = h!.subarray(0, 15 * rateHz);
    const line = lineAt(on, rateHz, 100).amplitude;
    expect(line / peakGOf(0.5, 100)).toBeCloseTo(1, 3);
    expect(lineAt(on, rateHz, 100 + 4 / 3).amplitude / line).toBeCloseTo(0.15, 3);
    expect(lineAt(on, rateHz, 100 - 4 / 3).amplitude / line).toBeCloseTo(0.15, 3);
    expect(rms(h!.subarray(17 * rateHz))).toBe(0);
  });

  it('amplifies at the natural frequency by √(1 + (p/2ζ)²): one mode beside the rigid body', () => {
    const resonance = { hz: 6 * ratedHz, damping: 0.05, participation: 0.4 };
    const plain = render(settings({ sources: { vanePassMmS: 1 } }), 10)[0]!;
    const resonant = render(settings({ sources: { vanePassMmS: 1 }, resonance }), 10)[0]!;
    const gain = (hz: number) => {
      const inside = (x: Float64Array) => lineAt(x.subarray(2 * rateHz), rateHz, hz).amplitude;
      return inside(resonant) / inside(plain);
    };
    expect(gain(6 * ratedHz)).toBeCloseTo(Math.hypot(1, 4), 2);
    // An octave above: |1 + p·s²/(s² + 2ζω₀s + ω₀²)| at s = 2iω₀ is |1 + 0.4·4/(3 − 0.2i)| = 1.532 by hand; the
    // bilinear transform moves it a little.
    expect(gain(12 * ratedHz)).toBeCloseTo(1.532, 1);
  });

  it('has flow noise of the RMS asked for, which falls with speed squared', () => {
    const [full] = render(settings({ sources: { flowRmsG: 0.05 } }), 20);
    const [half] = render(settings({ shaft: { ...shaft, speed: 0.5 }, sources: { flowRmsG: 0.05 } }), 20);
    expect(rms(full!) / 0.05).toBeCloseTo(1, 1);
    expect(rms(half!) / rms(full!)).toBeCloseTo(0.25, 6);
  });

  it('makes cavitation-like noise above 4 kHz that beats at vane pass', () => {
    const rate = 40_960;
    const [h] = render(settings({ sources: { cavitationG: 0.05 } }), 4, rate);
    const band = (from: number, to: number) => {
      let sum = 0;
      for (let hz = from; hz < to; hz += 97) sum += lineAt(h!.subarray(0, 16_384), rate, hz).amplitude ** 2;
      return sum / (to - from);
    };
    expect(band(5000, 13_000)).toBeGreaterThan(20 * band(100, 1500));
    const power = h!.map((x) => x * x);
    const mean = power.reduce((sum, x) => sum + x, 0) / power.length;
    const beat = (order: number) =>
      lineAt(
        power.map((x) => x - mean),
        rate,
        order * ratedHz,
      ).amplitude / mean;
    expect(beat(6)).toBeGreaterThan(0.4);
    expect(beat(6)).toBeGreaterThan(4 * beat(7.3));
  });

  it('drifts slowly within the percentage given', () => {
    const drifting = settings({ shaft: { ...shaft, driftPct: 1 }, points: ['mark'] });
    const [mark] = render(drifting, 60);
    const passes: number[] = [];
    for (let i = 1; i < mark!.length; i++) if (mark![i] === 1 && mark![i - 1] === 0) passes.push(i / rateHz);
    // Over ten turns, so that the sample grid counts for 0.05 %.
    const speeds = passes.slice(10).map((at, k) => 10 / (at - passes[k]!));
    const ratios = speeds.map((hz) => hz / ratedHz);
    expect(Math.max(...ratios)).toBeLessThan(1.0106);
    expect(Math.min(...ratios)).toBeGreaterThan(0.9894);
    expect(Math.max(...ratios) - Math.min(...ratios)).toBeGreaterThan(0.005);
  });

  it('shows the mark once a turn, and falls silent as it coasts down', () => {
    const speed: MachineSettings['shaft']['speed'] = [
      [0, 1],
      [4, 1],
      [8, 0],
      [12, 0],
    ];
    const stopping = { ...everything, shaft: { ...shaft, speed, powered: 0 } };
    const [h, , , mark] = render(stopping, 12);
    let passes = 0;
    for (let i = 1; i < mark!.length; i++) if (mark![i] === 1 && mark![i - 1] === 0) passes++;
    // 4 s at full speed and 4 s falling evenly: 6 s of full speed.
    expect(passes).toBe(Math.floor(6 * ratedHz));
    expect(rms(h!.subarray(11 * rateHz))).toBeLessThan(1e-9);
  });
});
