import { describe, expect, it } from 'vitest';
import { measureRecord } from '../../src/measure/measure.ts';
import { gaussian } from '../support/seeded.ts';
import { type BenchOptions, gOfVelocity, planOf, recordOf, type Tone, usual } from './bench.ts';

const RATE_HZ = 12_000;

function read(options: BenchOptions, tones: readonly Tone[], fields = {}) {
  const plan = planOf({ rateHz: RATE_HZ, ...options });
  return measureRecord(
    plan,
    recordOf({ rateHz: RATE_HZ, samples: plan.recordSamples, tones, noiseG: 0.01, ...fields }),
  );
}

const oneTimes: Tone = [24.631, gOfVelocity(3, 24.631)];

describe('shaft speed of a reading', () => {
  it('is found within the tolerance to better than 0.05 %, by a single line or by many', () => {
    const single = read({}, [oneTimes]);
    expect(single.shaft.source).toBe('spectrum');
    expect(Math.abs(single.shaft.hz! / 24.631 - 1)).toBeLessThan(0.0005);
    const many = Array.from({ length: 10 }, (_, i): Tone => [24.631 * (i + 1), 0.02]);
    const rich = read({}, many);
    expect(Math.abs(rich.shaft.hz! / 24.631 - 1)).toBeLessThan(0.0001);
    expect(rich.shaft.confidence!).toBeGreaterThan(0.9);
    expect(single.shaft.confidence!).toBeGreaterThan(0.9);
    expect(rich.quality).toBe('good');
  });

  it('is found within a wide range', () => {
    const reading = read({ machine: { shaft: { kind: 'range', rpmRange: [700, 1500] } } }, [oneTimes]);
    expect(Math.abs(reading.shaft.hz! / 24.631 - 1)).toBeLessThan(0.0005);
  });

  it('is found in the envelope where the acceleration has no line of the shaft', () => {
    // A resonance whose power the shaft modulates, as a loaded race does.
    const depth = 0.8;
    const carrier = 3170;
    const tones: Tone[] = [
      [310, gOfVelocity(1, 310)],
      [carrier, 0.2],
      [carrier - 24.631, (0.2 * depth) / 2],
      [carrier + 24.631, (0.2 * depth) / 2],
    ];
    const reading = read({}, tones);
    expect(reading.shaft.source).toBe('spectrum');
    expect(Math.abs(reading.shaft.hz! / 24.631 - 1)).toBeLessThan(0.0005);
  });

  it('is null with the reason where two candidates compete', () => {
    const reading = read({}, [
      [24.2, 0.05],
      [25.0, 0.05],
    ]);
    expect(reading.shaft).toEqual({ hz: null, source: null });
    expect(reading.quality).toBe('uncertain');
    expect(reading.why.join()).toMatch(/speed unknown: 2\d\.\d\d Hz and 2\d\.\d\d Hz compete/);
    expect(reading.velocity['running-speed']).toBeNull();
    expect(reading.velocity.overall).toBeGreaterThan(1);
  });

  it('is null with the reason where only noise is there', () => {
    const reading = read({}, [], { noiseG: 0.5 });
    expect(reading.running).toBe(true);
    expect(reading.shaft.hz).toBeNull();
    expect(reading.why).toEqual(['speed unknown: no line stands out where it could be']);
  });

  it.each([
    [200, 1],
    [160, 1],
  ])('is not found in the rounding of a lone tone at %d Hz, %d g', (hz, g) => {
    // Whole counts of a tone with a whole period have no noise at all: the rest is arithmetic.
    const options = { rateHz: 40_960, samples: planOf().recordSamples, noiseG: 0 };
    const reading = measureRecord(planOf(), recordOf({ ...options, tones: [[hz, g]] }));
    expect(reading.shaft).toEqual({ hz: null, source: null });
    expect(reading.orders['1'].mm_s).toBeNull();
  });

  it('is not synchronous speed on mains, and may be on an inverter', () => {
    const shaft = { kind: 'fixed', rpm: 1490, tolerancePct: 3 } as const;
    const tones: Tone[] = [[25, gOfVelocity(3, 25)]];
    const mains = read({ machine: { shaft, motor: { poles: 4, supply: 'mains' } } }, tones);
    expect(mains.why.join()).toMatch(
      /speed unknown: the line at 25.00 Hz is not below synchronous speed, 25 Hz/,
    );
    const inverter = read({ machine: { shaft, motor: { poles: 4, supply: 'inverter' } } }, tones);
    expect(inverter.shaft.hz).toBeCloseTo(25, 2);
    // A 60 Hz site has 30 Hz for four poles.
    const site60 = read({ machine: { shaft, motor: { poles: 4, supply: 'mains' } }, mainsHz: 60 }, tones);
    expect(site60.shaft.hz).toBeCloseTo(25, 2);
  });

  it.each([
    [50, 2966],
    [50, 2985],
    [60, 3575],
  ])('is told from the mains, of %d Hz, where a two-pole motor turns at %d r/min', (mainsHz, rpm) => {
    const hz = rpm / 60;
    const machine = {
      shaft: { kind: 'fixed', rpm, tolerancePct: 2 },
      motor: { poles: 2, supply: 'mains' },
    } as const;
    const reading = read({ machine, mainsHz }, [[hz, gOfVelocity(2, hz)]]);
    expect(Math.abs(reading.shaft.hz! / hz - 1)).toBeLessThan(0.0005);
    expect(reading.quality).toBe('good');
  });

  it.each([2.93, 3.053, 3.07, 3.1])('is not a part of the strikes of a bearing whose BPFO is %d', (bpfo) => {
    // A comb at a third of the strikes has them for its teeth, and a shaft of 1480 r/min within the tolerance.
    const rateHz = 10_240;
    const hz = 1480 / 60;
    const multiples = { ftf: bpfo / 8, bsf: 2.2, bpfo, bpfi: 8 - bpfo };
    const plan = planOf({
      rateHz,
      point: { bearings: [{ id: 'de', elements: 8, geometry: null, multiples }] },
    });
    const tones = [
      [hz, gOfVelocity(1.5, hz)],
      [2 * hz, gOfVelocity(0.3, 2 * hz), 1],
    ] as const;
    const record = recordOf({ rateHz, samples: plan.recordSamples, tones, noiseG: 0.03 });
    const random = gaussian(77);
    for (let t = 0.003; t < record.counts.length / rateHz; t += (1 + 0.002 * random()) / (bpfo * hz)) {
      for (let i = Math.ceil(t * rateHz); i < (t + 0.01) * rateHz && i < record.counts.length; i++) {
        const s = i / rateHz - t;
        record.counts[i]! += Math.round(4096 * 0.4 * Math.exp(-800 * s) * Math.sin(2 * Math.PI * 1900 * s));
      }
    }
    const reading = measureRecord(plan, record);
    expect(Math.abs(reading.shaft.hz! / hz - 1)).toBeLessThan(0.001);
    expect(reading.envelope?.defect).toBe('outer');
  });

  it.each([
    ['twice the speed', 1551, [0.5, 1, 0.2]],
    ['six vanes', 510, [1, 0.2, 0, 0, 0, 1]],
  ])('is not outshone by %s from outside of the range', (_, rpm, harmonics) => {
    const hz = rpm / 60;
    const tones = harmonics.map((mmS, k): Tone => [hz * (k + 1), gOfVelocity(2 * mmS, hz * (k + 1)), k]);
    const machine = {
      shaft: { kind: 'range', rpmRange: [500, 3000] },
      motor: { poles: null, supply: 'inverter' },
    } as const;
    const reading = read(
      { machine },
      tones.filter(([, g]) => g > 0),
    );
    expect(Math.abs(reading.shaft.hz! / hz - 1)).toBeLessThan(0.002);
  });

  it('is looked for without complaint in whatever band the rate and the settings leave', () => {
    const bands = [
      [500, 16_000],
      [500, 2000],
      [1000, 2500],
      [500, 1500],
      [2000, 3000],
      [500, 1000],
    ] as const;
    for (const rateHz of [2600, 3000, 3200, 5000, 8192, 10_240, 16_384, 20_480]) {
      for (const bandHz of bands) {
        if (bandHz[0] >= rateHz / 2.56) continue;
        const measure = { everyS: 1, envelope: { ...usual.envelope, bandHz, lines: 400 } } as const;
        const plan = planOf({ rateHz, measure });
        for (const ratio of [1, 1 - 2e-5, 1 + 2e-5]) {
          const record = recordOf({ rateHz: rateHz * ratio, samples: plan.recordSamples, noiseG: 0.001 });
          expect(measureRecord(plan, record).running, `${rateHz} Hz, ${bandHz}`).toBe(false);
        }
      }
    }
  });

  it('says so where the speed changes within the record', () => {
    const plan = planOf({
      rateHz: RATE_HZ,
      machine: { shaft: { kind: 'fixed', rpm: 1480, tolerancePct: 5 } },
    });
    const random = gaussian(2);
    const ramped = (rise: number) => {
      const record = recordOf({ rateHz: RATE_HZ, samples: plan.recordSamples });
      for (let i = 0; i < record.counts.length; i++) {
        const t = i / RATE_HZ;
        const turns = 24.4 * t + (rise * t * t) / 2;
        let g = 0.005 * random();
        for (let k = 1; k <= 3; k++) g += 0.1 * Math.cos(2 * Math.PI * k * turns);
        record.counts[i] = Math.round(g * 4096);
      }
      return measureRecord(plan, record);
    };
    expect(ramped(0).quality).toBe('good');
    const drifting = ramped(0.07);
    expect(drifting.quality).toBe('uncertain');
    expect(drifting.why.join()).toMatch(/speed (varies within the record|unknown)/);
  });

  it('is as configured where the tolerance is nought, as told, or not asked for', () => {
    const fixed = read({ machine: { shaft: { kind: 'fixed', rpm: 1480, tolerancePct: 0 } } }, [oneTimes]);
    expect(fixed.shaft).toEqual({ hz: 1480 / 60, source: 'configured' });
    const mqtt = { machine: { shaft: { kind: 'mqtt', topic: 'plc/speed' } } } as const;
    expect(read(mqtt, [oneTimes], { toldShaftHz: 24.6 }).shaft).toEqual({ hz: 24.6, source: 'mqtt' });
    const untold = read(mqtt, [oneTimes]);
    expect(untold.shaft.hz).toBeNull();
    expect(untold.why).toEqual(['speed unknown: nothing usable was told lately']);
    const other = { kind: 'tachometer', link: 'node-2', channel: 'tach', pulsesPerRev: 1 } as const;
    const far = read({ machine: { shaft: other }, point: { ratio: 0.5 } }, [oneTimes], { toldShaftHz: 24.6 });
    expect(far.shaft).toEqual({ hz: 12.3, source: 'tachometer' });
    const dark = read({ machine: { shaft: other } }, [oneTimes]);
    expect(dark.why).toEqual(['speed unknown: no tachometer pulses']);
    const none = read({ machine: { shaft: null } }, [oneTimes]);
    expect(none).toMatchObject({ shaft: { hz: null, source: null }, why: [], quality: 'good', zone: 'B' });
  });

  it('is searched for at the speed of the point, behind a gear', () => {
    const reading = read({ point: { ratio: 0.5 } }, [[12.3155, gOfVelocity(2, 12.3155)]]);
    expect(Math.abs(reading.shaft.hz! / 12.3155 - 1)).toBeLessThan(0.0005);
  });
});

describe('running and zones', () => {
  it('runs above its threshold; at rest there is no zone and no speed to be missed', () => {
    const rest = read({}, [[24.631, gOfVelocity(0.3, 24.631)]], { noiseG: 0.001 });
    expect(rest).toMatchObject({ running: false, zone: null, quality: 'good', why: [] });
    expect(rest.velocity.overall).toBeCloseTo(0.3, 1);
    // A smooth machine may run below the threshold: what its speed tells is not thrown away.
    expect(rest.shaft.hz).toBeCloseTo(24.631, 2);
    const still = read({}, [], { noiseG: 0.001 });
    expect(still).toMatchObject({
      running: false,
      zone: null,
      quality: 'good',
      why: [],
      shaft: { hz: null },
    });
    expect(read({}, [oneTimes])).toMatchObject({ running: true, zone: 'B' });
  });

  it('goes by what is told, and has no zone where nothing is', () => {
    const told = { machine: { running: { kind: 'mqtt', topic: 'plc/run' } } } as const;
    expect(read(told, [oneTimes], { toldRunning: true })).toMatchObject({ running: true, zone: 'B' });
    expect(read(told, [oneTimes], { toldRunning: false })).toMatchObject({ running: false, zone: null });
    expect(read(told, [oneTimes])).toMatchObject({
      running: null,
      zone: null,
      why: ['running unknown: nothing usable was told lately'],
    });
  });

  it('has zones where the table applies only', () => {
    expect(read({ point: { at: 'foot' } }, [oneTimes]).zone).toBeNull();
    expect(read({ point: { direction: 'axial' } }, [oneTimes]).zone).toBeNull();
    expect(read({ point: { direction: 'axial', thrust: true } }, [oneTimes]).zone).toBe('B');
    expect(read({ point: { severity: null } }, [oneTimes]).zone).toBeNull();
    const slow = { machine: { shaft: { kind: 'fixed', rpm: 300, tolerancePct: 3 } } } as const;
    expect(read(slow, [[5, gOfVelocity(3, 5)]])).toMatchObject({ running: true, zone: null });
  });

  it('lets displacement decide at low speed, by ISO 20816-3', () => {
    const severity = { table: 'iso-20816-3', group: 2, support: 'rigid' } as const;
    const shaft = { kind: 'fixed', rpm: 300, tolerancePct: 3 } as const;
    // 1.3 mm/s is zone A by velocity; at 5 Hz it is 41 µm, zone B by displacement.
    const reading = read({ point: { severity }, machine: { shaft } }, [[5, gOfVelocity(1.3, 5)]], {
      noiseG: 0.001,
    });
    expect(reading.displacement.rms).toBeCloseTo(1300 / (2 * Math.PI * 5), 0);
    expect(reading.zone).toBe('B');
  });
});
