/** The part of a report about one point: its charts, all its figures, its bearing lines. */

import { lineNames, lineTitles } from '../measure/bearing-lines.ts';
import type { Reading } from '../measure/reading.ts';
import { html, type Markup } from './markup.ts';
import type { PointReport } from './model.ts';
import type { Curve } from './spectra.ts';
import { defectNames, figure, hertz, seconds, time } from './words.ts';

export function pointSection(report: PointReport, index: number): Markup {
  const { machine, point, plan, shown, recordS, curves, samples } = report;
  const place = [
    point.part,
    point.end === 'de' ? 'drive end' : point.end && 'non-drive end',
    point.direction,
  ];
  const [low, high] = shown.reading.envelope?.band_hz ?? [0, 0];
  const every = samples.block === 1 ? '' : ` The page holds the extremes of each ${samples.block} samples.`;
  return html`<section class="point" id="point-${index}">
<h2>${machine.name} · ${point.id} <small>${place.filter(Boolean).join(', ')}</small></h2>
${chart('waveform', index, 'Acceleration over time', `g, mean removed. Shaded: the record from ${seconds(recordS[0])} to ${seconds(recordS[1])} that the spectra are of.${every}`)}
${curves.velocity && chart('velocity', index, 'Velocity spectrum', `mm/s RMS of a line; ${resolution(curves.velocity)}.`)}
${curves.acceleration && chart('acceleration', index, 'Acceleration spectrum', `g RMS of a line, over all that the sample rate carries; ${resolution(curves.acceleration)}.`)}
${curves.envelope && chart('envelope', index, 'Envelope spectrum', `of the squared envelope of ${low}–${high} Hz, g²; ${resolution(curves.envelope)}. A name in brackets: no line was found where it is expected.`)}
${bearingTable(report)}
${figures(report, index)}
${report.readings.length > 1 && history(report)}
${report.cascade && cascadeChart(index, plan.key)}
</section>`;
}

function resolution({ lineHz, averages }: Curve): string {
  return `lines ${Number(lineHz.toPrecision(3))} Hz apart, ${averages} averages`;
}

function chart(kind: string, index: number, title: string, note: string): Markup {
  return html`<figure class="chart" data-chart="${kind}" data-point="${index}"><figcaption><b>${title}</b> <span>${note}</span></figcaption></figure>`;
}

function cascadeChart(index: number, key: string): Markup {
  return html`<figure class="chart" data-chart="cascade" data-point="${index}"><figcaption><b>Cascade of velocity spectra</b> <span>${key}, from the first second at the bottom to the last at the top. What slants turns with the shaft; what stands upright is structure or supply.</span></figcaption></figure>`;
}

function bearingTable({ point, shown, plan }: PointReport): Markup | null {
  const { envelope } = shown.reading;
  if (envelope === null || plan.bearings.length === 0) return null;
  if (envelope.bearing === undefined) {
    return html`<p class="note">Without a shaft speed no line of ${plan.bearings.map(({ id }) => id).join(', ')} can be looked for.</p>`;
  }
  const row = (name: (typeof lineNames)[number]) => {
    const line = envelope[name];
    const of = (key: string) => `${point.key}/envelope.${name}.${key}`;
    return html`<tr><th scope="row">${lineTitles[name]}</th>
<td class="number" data-figure="${of('expected_hz')}">${figure(line?.expected_hz)}</td><td class="number" data-figure="${of('hz')}">${figure(line?.hz)}</td>
<td class="number" data-figure="${of('line')}">${figure(line?.line)}</td><td class="number" data-figure="${of('over_floor_db')}">${figure(line?.over_floor_db)}</td>
<td class="number" data-figure="${of('modulation')}">${figure(line?.modulation)}</td><td class="number" data-figure="${of('harmonics')}">${figure(line?.harmonics)}</td></tr>`;
  };
  return html`<h3>Bearing ${envelope.bearing}: ${envelope.defect ? `accuses the ${defectNames[envelope.defect]}` : 'no part accused'}</h3>
<div class="scroll"><table><thead><tr><th>Line</th><th>Expected, Hz</th><th>Found, Hz</th><th>Line, g²</th><th>Over floor, dB</th><th>Of the mean</th><th>Harmonics</th></tr></thead>
<tbody>${lineNames.map(row)}</tbody></table></div>`;
}

/** Every other figure of the reading, under the path that an alarm rule would watch it by. */
function figures({ point, shown }: PointReport, index: number): Markup {
  const { velocity, envelope, rate, first_index, ...rest } = shown.reading;
  const rows = leavesOf('', {
    ...rest,
    velocity: { overall: velocity.overall },
    envelope: envelope && { mean: envelope.mean, floor: envelope.floor },
    rate: {
      hz: Number(rate.hz.toPrecision(9)),
      ppm: rate.ppm === null ? null : Number(rate.ppm.toPrecision(2)),
    },
  });
  return html`<h3 id="figures-${index}">Figures of the reading of ${time(shown.t)}, from sample ${first_index}</h3>
<dl class="figures">${rows.map(
    ([path, value]) =>
      html`<div><dt>${path}</dt><dd><span data-figure="${point.key}/${path}">${figure(value)}</span>${value === null ? '' : ` ${unitOf(path)}`}</dd></div>`,
  )}</dl>`;
}

/** Numbers within a reading, and nulls where one could be; `a.b` names b of a. */
function leavesOf(prefix: string, value: unknown): [string, number | null][] {
  if (typeof value === 'number' || value === null) return [[prefix, value]];
  if (typeof value !== 'object' || Array.isArray(value)) return [];
  return Object.entries(value as object).flatMap(([key, part]) =>
    NO_FIGURES.has(key) ? [] : leavesOf(prefix === '' ? key : `${prefix}.${key}`, part),
  );
}

/** Words, though they may be null. */
const NO_FIGURES: ReadonlySet<string> = new Set(['zone', 'source', 'running', 'defect']);

function unitOf(path: string): string {
  const key = path.slice(path.lastIndexOf('.') + 1);
  if (path.startsWith('displacement.')) return key === 'p2p' ? 'µm p-p' : 'µm RMS';
  if (path.startsWith('envelope.')) return 'g²';
  if (path === 'velocity.overall' || key === 'mm_s') return 'mm/s RMS';
  if (path === 'acceleration.rms') return 'g RMS';
  if (key.endsWith('_hz')) return 'Hz';
  return { 'acceleration.peak': 'g' }[path] ?? { hz: 'Hz', deg: '°', ppm: 'ppm' }[key] ?? '';
}

const MOST_READINGS = 60;

function history({ readings, shown }: PointReport): Markup {
  const rows = readings.slice(-MOST_READINGS);
  const row = ({
    t,
    reading,
  }: {
    t: string;
    reading: Reading;
  }) => html`<tr${t === shown.t && html` class="shown"`}><td>${time(t)}</td><td>${reading.quality}</td>
<td class="number">${reading.shaft.hz === null ? '–' : hertz(reading.shaft.hz)}</td><td class="number">${figure(reading.velocity.overall)}</td><td>${reading.zone ?? '–'}</td>
<td class="number">${figure(reading.acceleration.rms)}</td><td>${reading.envelope?.defect ? defectNames[reading.envelope.defect] : '–'}</td></tr>`;
  return html`<details><summary>All ${readings.length} readings of this recording${readings.length > rows.length && `, the last ${rows.length}`}</summary>
<div class="scroll"><table><thead><tr><th>Record ends</th><th>Quality</th><th>Shaft</th><th>Velocity, mm/s RMS</th><th>Zone</th><th>Acceleration, g RMS</th><th>Accuses</th></tr></thead><tbody>${rows.map(row)}</tbody></table></div></details>`;
}
