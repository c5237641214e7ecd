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
  const row = (name: (typeof lineNames)[number]) => {
    const line = envelope[name];
    const of = (key: string) => `${point.key}/envelope.${name}.${key}`;
    return html`<tr><th scope="row">${lineTitles[name]}</th>
<td class="number" data-figure="${of('expected_hz')}">${figure(line?.expected_hz)}</td><td class="number" data-figure="${of('hz')}">${figure(line?.hz)}</td>
<td class="number" data-figure="${of('line')}">${figure(line?.line)}</td><td class="number" data-figure="${of('over_floor_db')}">${figure(line?.over_floor_db)}</td>
<td class="number" data-figure="${of('modulation')}">${figure(line?.modulation)}</td><td class="number" data-figure="${of('harmonics')}">${figure(line?.harmonics)}</td></tr>`;
  };
  return html`<h3>Bearing ${envelope.bearing ?? ''}: ${envelope.defect ? `accuses the ${defectNames[envelope.defect]}` : 'no part accused'}</h3>
<div class="scroll"><table><thead><tr><th>Line</th><th>Expected, Hz</th><th>Found, Hz</th><th>Line, g²</th><th>Over floor, dB</th><th>Of the mean</th><th>Harmonics</th></tr></thead>
<tbody>${lineNames.map(row)}</tbody></table></div>`;
}

/** Every figure of the reading, under the path that an alarm rule would watch it by. */
function figures({ point, shown }: PointReport, index: number): Markup {
  const { velocity, displacement, orders, acceleration, envelope, shaft, rate } = shown.reading;
  const rows: [string, number | null | undefined, string][] = [
    ['shaft.hz', shaft.hz, 'Hz'],
    ['velocity.overall', velocity.overall, 'mm/s RMS'],
    ['displacement.rms', displacement.rms, 'µm RMS'],
    ['displacement.p2p', displacement.p2p, 'µm peak to peak'],
    ...(['1', '2', '3'] as const).flatMap((order): [string, number | null, string][] => [
      [`orders.${order}.mm_s`, orders[order].mm_s, 'mm/s RMS'],
      ...(orders[order].deg === null
        ? []
        : [[`orders.${order}.deg`, orders[order].deg, '°'] as [string, number, string]]),
    ]),
    ['acceleration.rms', acceleration.rms, 'g RMS'],
    ['acceleration.peak', acceleration.peak, 'g'],
    ['acceleration.crest', acceleration.crest, ''],
    ['acceleration.kurtosis', acceleration.kurtosis, ''],
    ['envelope.mean', envelope?.mean, 'g²'],
    ['envelope.floor', envelope?.floor, 'g²'],
    ['rate.hz', Number(rate.hz.toPrecision(9)), 'Hz'],
  ];
  return html`<h3 id="figures-${index}">Figures of the reading of ${time(shown.t)}</h3>
<dl class="figures">${rows.map(
    ([path, value, unit]) =>
      html`<div><dt>${path}</dt><dd><span data-figure="${point.key}/${path}">${figure(value)}</span> ${value === null || value === undefined ? '' : unit}</dd></div>`,
  )}</dl>`;
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
