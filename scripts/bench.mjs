// Cost of the signal path: the chain as the agent runs it against a naive one (one long FIR, full-rate Hilbert
// transform), CPU time, interleaved rounds, medians. Runs what `npm run build` made: node scripts/bench.mjs [rounds]
import { cpus, totalmem } from 'node:os';
import FFT from 'fft.js';
import { decimate, planDecimation } from '../dist/signal/decimate.js';
import { bandEnvelope, recordTransform } from '../dist/signal/envelope.js';
import { velocityWeights } from '../dist/signal/integrate.js';
import { designLowpass } from '../dist/signal/kaiser.js';
import { averagedSpectrum, bandMeanSquare } from '../dist/signal/spectrum.js';
import { statistics } from '../dist/signal/statistics.js';

const rounds = Number(process.argv[2] ?? 9);
const rateHz = 40_960;
const seconds = 10;

/** Seeded counts of 16 bit: two tones, a modulated resonance, noise. */
function recording() {
  let state = 20_261;
  const noise = () => {
    state = (Math.imul(state, 1_664_525) + 1_013_904_223) >>> 0;
    return state / 2 ** 32 - 0.5;
  };
  return Float64Array.from({ length: rateHz * seconds }, (_, i) => {
    const t = (2 * Math.PI * i) / rateHz;
    const ringing = (1 + 0.5 * Math.cos(88 * t)) * Math.sin(7000 * t);
    return Math.round(1000 * Math.sin(24.7 * t) + 300 * Math.sin(49.4 * t) + 500 * ringing + 400 * noise());
  });
}

const x = recording();
const velocityPlan = planDecimation({ rateHz, factor: 16, fmaxHz: 1000, attenuationDb: 80 });
const envelopePlan = planDecimation({ rateHz: rateHz / 2, factor: 16, fmaxHz: 500, attenuationDb: 80 });
const longFir = designLowpass({ rateHz, passHz: 1000, stopHz: 1560, attenuationDb: 80 });
const envelopeFir = designLowpass({ rateHz, passHz: 500, stopHz: 780, attenuationDb: 80 });
const block = { rateHz: 2560, blockSamples: 4096, window: 'hann' };

function figures(moments, velocity, envelope) {
  const weight = velocityWeights(velocity, 'm/s2');
  const bands = [
    [10, 1000],
    [2, 10],
    [20, 30],
    [45, 250],
  ].map((band) => Math.sqrt(bandMeanSquare(velocity, band, { weight })));
  const line = Math.round(88 / envelope.binHz);
  return [moments.rms, moments.kurtosis, ...bands, envelope.meanSquare[line]];
}

const parts = {
  statistics: () => statistics(x),
  decimation: () => decimate(velocityPlan, x),
  'envelope transform': () => recordTransform(x, { rateHz }),
};

function asRun() {
  const moments = statistics(x);
  const velocity = averagedSpectrum(decimate(velocityPlan, x), block);
  const { values } = bandEnvelope(recordTransform(x, { rateHz }), { bandHz: [500, 16_000], fmaxHz: 500 });
  const envelope = averagedSpectrum(decimate(envelopePlan, values), {
    ...block,
    rateHz: 1280,
    blockSamples: 4096,
  });
  return figures(moments, velocity, envelope);
}

/** Every output of one long filter, all taps, no symmetry. */
function convolve(samples, taps, factor) {
  const out = new Float64Array(Math.floor((samples.length - taps.length) / factor) + 1);
  for (let i = 0; i < out.length; i++) {
    let sum = 0;
    for (let k = 0; k < taps.length; k++) sum += taps[k] * samples[i * factor + k];
    out[i] = sum;
  }
  return out;
}

function naive() {
  const moments = statistics(x);
  const velocity = averagedSpectrum(convolve(x, longFir, 16), block);
  const size = 2 ** Math.ceil(Math.log2(x.length));
  const fft = new FFT(size);
  const data = new Float64Array(2 * size);
  const bins = new Float64Array(2 * size);
  for (let i = 0; i < x.length; i++) data[2 * i] = x[i] - moments.mean;
  fft.transform(bins, data);
  for (let k = 0; k < size; k++) {
    const f = (k * rateHz) / size;
    const gain = f >= 500 && f <= 16_000 ? 2 : 0;
    bins[2 * k] *= gain;
    bins[2 * k + 1] *= gain;
  }
  fft.inverseTransform(data, bins);
  const square = new Float64Array(x.length);
  for (let i = 0; i < x.length; i++) square[i] = data[2 * i] ** 2 + data[2 * i + 1] ** 2;
  const envelope = averagedSpectrum(convolve(square, envelopeFir, 32), { ...block, rateHz: 1280 });
  return figures(moments, velocity, envelope);
}

/** CPU milliseconds of one call, and what it gave, so that no work can be left out. */
function timed(run) {
  const before = process.cpuUsage();
  const result = run();
  const { user, system } = process.cpuUsage(before);
  return { ms: (user + system) / 1000, result };
}

const variants = { 'as run': asRun, naive, ...parts };
const spent = Object.fromEntries(Object.keys(variants).map((name) => [name, []]));
let check;
for (let round = -2; round < rounds; round++) {
  const results = {};
  for (const [name, run] of Object.entries(variants)) {
    const { ms, result } = timed(run);
    results[name] = result;
    if (round >= 0) spent[name].push(ms);
  }
  check = results['as run'].map((value, i) => value / results.naive[i] - 1);
}

const median = (values) => values.sort((a, b) => a - b)[values.length >> 1];
const [cpu] = cpus();
console.log(
  `${cpu?.model.trim()} × ${cpus().length}, ${Math.round(totalmem() / 2 ** 30)} GB, Node ${process.version}`,
);
console.log(`${seconds} s at ${rateHz} Hz, medians of ${rounds} rounds`);
for (const [name, values] of Object.entries(spent)) {
  const ms = median(values);
  const perCpuSecond = (1000 * seconds) / ms;
  console.log(
    `${name.padEnd(20)} ${(ms / seconds).toFixed(3)} ms per channel-second, ${perCpuSecond.toFixed(0)} channel-seconds per CPU second`,
  );
}
console.log(`naive / as run: ${(median(spent.naive) / median(spent['as run'])).toFixed(2)}`);
console.log(
  `largest relative difference of their figures: ${Math.max(...check.map(Math.abs)).toExponential(1)}`,
);
