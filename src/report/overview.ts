/** The first part of a report: what was found, how far to trust it, levels against zones. */

import { severityApplies, severityLimits } from '../machine/severity.ts';
import { html, type Markup } from './markup.ts';
import type { PointReport, ReportModel } from './model.ts';
import { defectNames, faultName, figure, hertz, seconds, time } from './words.ts';

export function verdicts({ points }: ReportModel): Markup {
  const card = ({ shown, point, machine }: PointReport, index: number) => {
    const { zone, velocity, envelope, quality } = shown.reading;
    const defect = envelope?.defect;
    return html`<a class="card${defect ? ' accused' : ''}" href="#point-${index}">
<span class="zone zone-${zone ?? 'none'}">${zone ?? '–'}</span>
<span class="card-name">${machine.name} · ${point.id}</span>
<span class="card-figure">${figure(velocity.overall)} <small>mm/s RMS</small></span>
<span class="card-note">${defect ? `accuses the ${defectNames[defect]}` : envelope ? 'no bearing part accused' : 'no envelope'}${quality === 'good' ? '' : ` · ${quality}`}</span>
</a>`;
  };
  return html`<div class="cards">${points.map(card)}</div>`;
}

export function findings({ machines }: ReportModel): Markup {
  return html`${machines.map(
    ({ machine, findings: found }) => html`<div class="findings"><h3>${machine.name}</h3>
${
  found.length === 0
    ? html`<p>Nothing in the records below speaks for a known fault.</p>`
    : found.map(
        ({ fault, likelihood, points, evidence, check }) => html`<article class="finding ${likelihood}">
<h4><span class="likelihood">${likelihood}</span> ${faultName(fault)}</h4>
<ul>${evidence.map((sentence) => html`<li>${sentence}</li>`)}</ul>
<p><b>Seen at</b> ${points.join(', ')}. <b>Next:</b> ${check}</p></article>`,
      )
}</div>`,
  )}`;
}

export function trust(model: ReportModel): Markup {
  const { input, seconds: length, points } = model;
  const { recording, rate, stationGiven } = input;
  const { tags } = recording;
  const rateText = {
    nominal: 'as claimed, not measured',
    measured: 'measured',
    given: 'given on the command line',
  }[rate.source];
  const rows: [string, Markup | string][] = [
    ['File', `${input.fileName}, ${recording.channels} channels, ${recording.bitsPerSample} bit`],
    ['Begins', input.start === null ? 'not known' : `${time(input.start)}${clockText(tags?.clock)}`],
    ['Lasts', `${seconds(length)}, ${recording.frames} samples a channel`],
    ['Sample rate', `${figure(Number(rate.hz.toPrecision(9)))} Hz, ${rateText}${ppmText(rate.ppm)}`],
  ];
  if (tags !== null) {
    rows.push(
      ['Cause', tags.cause === '' ? 'not stated' : tags.cause],
      ['Alarms', tags.alarms.length === 0 ? 'none' : tags.alarms.join(', ')],
      ['Snapshot', tags.id],
      ['Node', `${tags.link}${tags.nodeSerial === null ? '' : `, serial ${tags.nodeSerial}`}`],
      ['Recorded by', `agent ${tags.version}, configuration ${tags.config}`],
    );
    if (tags.gaps.length > 0) {
      const missing = tags.gaps.reduce((sum, gap) => sum + gap.samples, 0);
      rows.push([
        'Gaps',
        `${missing} samples never came; zeros stand for them and records with them are not measured`,
      ]);
    }
    if (stationGiven && tags.config !== input.station.configHash) {
      rows.push([
        'Settings',
        `those of ${input.station.configHash}; the recording was made under ${tags.config}, so its live readings may differ`,
      ]);
    }
  }
  if (!stationGiven) {
    rows.push([
      'Settings',
      'no station file was given: default settings, no bearings, no zones; speeds are those noted in the recording',
    ]);
  }
  return html`<dl class="facts">${rows.map(([name, value]) => html`<dt>${name}</dt><dd>${value}</dd>`)}</dl>
<div class="scroll"><table><thead><tr><th>Point</th><th>Quality</th><th>Shaft speed</th><th>Why</th></tr></thead><tbody>
${points.map(
  ({ point, shown }) => html`<tr><th scope="row">${point.key}</th><td>${shown.reading.quality}</td>
<td>${speedText(shown.reading.shaft)}</td><td>${shown.reading.why.join('; ') || '–'}</td></tr>`,
)}</tbody></table></div>`;
}

function clockText(clock: 'synchronised' | 'free' | undefined): string {
  if (clock === undefined) return '';
  return clock === 'synchronised'
    ? ', clock synchronised'
    : ', clock not synchronised: the time of day is a guess';
}

function ppmText(ppm: number | null): string {
  return ppm === null ? ', uncertainty not known' : `, within ${Number(ppm.toPrecision(2))} ppm`;
}

function speedText({ hz, source, confidence }: PointReport['shown']['reading']['shaft']): string {
  if (hz === null) return 'not known';
  const from = {
    spectrum: 'found in the spectrum',
    tachometer: 'tachometer',
    mqtt: 'told',
    configured: 'configured',
  };
  const sure = confidence === undefined ? '' : `, confidence ${confidence}`;
  return `${hertz(hz)} = ${Math.round(hz * 60)} r/min, ${source === null ? '' : from[source]}${sure}`;
}

/** Velocity bands of each point, the overall one against its zones. */
export function levels({ points }: ReportModel): Markup {
  return html`${points.map((report) => {
    const { point, shown } = report;
    const { velocity } = shown.reading;
    const bands = Object.entries(velocity).filter(([key]) => key !== 'unit' && key !== 'overall');
    const most = Math.max(0, ...Object.values(velocity).filter((value) => typeof value === 'number'));
    return html`<div class="levels"><h3>${point.key}</h3>${zoneBar(report)}
<div class="scroll"><table class="bands"><thead><tr><th>Band</th><th>mm/s RMS</th><th></th></tr></thead><tbody>
${[['overall', velocity.overall] as const, ...bands].map(([id, value]) => {
  const share = typeof value === 'number' && most > 0 ? (100 * value) / most : 0;
  return html`<tr><th scope="row">${id} <small>${bandRange(report, id)}</small></th><td class="number" data-figure="${point.key}/velocity.${id}">${figure(value as number | null)}</td>
<td class="bar"><svg viewBox="0 0 100 8" preserveAspectRatio="none" aria-hidden="true"><rect width="${share.toFixed(1)}" height="8"/></svg></td></tr>`;
})}</tbody></table></div></div>`;
  })}`;
}

function bandRange({ plan, shown }: PointReport, id: string): string {
  if (id === 'overall') return `${plan.overallHz[0]}–${Number(plan.overallHz[1].toFixed(1))} Hz`;
  const band = plan.point.measure.bands.find((one) => one.id === id);
  if (band === undefined) return '';
  if ('hz' in band.range) return `${band.range.hz[0]}–${band.range.hz[1]} Hz`;
  const [low, high] = band.range.orders;
  const { hz } = shown.reading.shaft;
  return `${low}–${high}x${hz === null ? '' : `, ${(low * hz).toFixed(1)}–${(high * hz).toFixed(1)} Hz`}`;
}

/** The zones as stretches of a line, the value as a mark on it. */
function zoneBar({ point, plan, shown }: PointReport): Markup {
  const not = severityApplies(point, shown.reading.shaft.hz ?? plan.shaft?.nominalHz ?? null);
  if (not !== null || point.severity === null) return html`<p class="note">No zones: ${not}.</p>`;
  const limits = severityLimits(point.severity);
  const [ab, bc, cd] = limits.velocityMmS;
  const value = shown.reading.velocity.overall;
  const top = Math.max(1.35 * cd, 1.05 * (value ?? 0));
  const at = (mmS: number) => ((100 * mmS) / top).toFixed(2);
  const stretches = [
    ['A', 0, ab],
    ['B', ab, bc],
    ['C', bc, cd],
    ['D', cd, top],
  ] as const;
  return html`<div class="zonebar" role="img" aria-label="${`${figure(value)} mm/s, zone ${shown.reading.zone ?? 'not given'}; limits ${ab}, ${bc}, ${cd} mm/s`}">
${stretches.map(([zone, from, to]) => html`<i class="zone-${zone}" style="left:${at(from)}%;width:${at(to - from)}%">${zone}</i>`)}
${[ab, bc, cd].map((limit) => html`<span class="limit" style="left:${at(limit)}%">${limit}</span>`)}
${value !== null && html`<b style="left:${at(value)}%"></b>`}</div>
<p class="note">Zones of ${limits.name}, mm/s RMS${limits.displacementUm === null ? '' : '; displacement is judged too'}.</p>`;
}
