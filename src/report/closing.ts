/** The last part of a report: alarms, the journal, the settings that everything was measured with. */

import { html, type Markup } from './markup.ts';
import type { AlarmLine, PointReport, ReportModel } from './model.ts';
import { figure, time } from './words.ts';

/** A page is read by a person: the newest lines are. */
const MOST_LINES = 200;

export function alarms({ input }: ReportModel): Markup {
  return html`<h3>What the rules of the settings make of this recording alone</h3>
${lines(input.alarms, 'No rule changed state. On-delays count: a short recording may end before one has passed.')}
${
  input.journal !== null &&
  html`<h3>Alarm journal of the station</h3>${lines(input.journal, 'The journal holds nothing of these machines.')}`
}`;
}

function lines(all: readonly AlarmLine[], none: string): Markup {
  if (all.length === 0) return html`<p>${none}</p>`;
  const shown = all.slice(-MOST_LINES);
  return html`${all.length > shown.length && html`<p class="note">The last ${shown.length} of ${all.length}.</p>`}
<div class="scroll"><table class="stacks"><thead><tr><th>Time</th><th>Alarm</th><th>State</th><th>Level</th><th>Value</th><th>Reason</th></tr></thead><tbody>${shown.map(
    (
      line,
    ) => html`<tr><td data-label="Time">${time(word(line.t))}</td><td data-label="Alarm">${word(line.machine)}${line.alarm === undefined ? '' : `/${word(line.alarm)}`}</td>
<td data-label="State">${word(line.state ?? line.kind)}</td><td data-label="Level">${word(line.level) || '–'}</td><td data-label="Value">${value(line)}</td><td data-label="Reason">${word(line.reason ?? line.text)}</td></tr>`,
  )}</tbody></table></div>`;
}

function word(value: unknown): string {
  return typeof value === 'string' || typeof value === 'number' ? String(value) : '';
}

function value({ value, unit }: AlarmLine): string {
  if (typeof value === 'number') return figure(value, word(unit));
  return typeof value === 'string' ? value : '–';
}

export function settings({ points, input }: ReportModel): Markup {
  const { station, version } = input;
  return html`<p class="note">Configuration ${station.configHash}, mains ${station.site.mainsHz} Hz, measured by Forebay ${version}.</p>
<div class="scroll"><table class="stacks"><thead><tr><th>Point</th><th>Velocity</th><th>Envelope</th><th>Shaft</th><th>Bearings</th><th>Sensor</th></tr></thead><tbody>${points.map(
    (report) =>
      html`<tr><th scope="row">${report.point.key}</th><td data-label="Velocity">${velocityText(report)}</td><td data-label="Envelope">${envelopeText(report)}</td><td data-label="Shaft">${shaftText(report)}</td><td data-label="Bearings">${bearingText(report)}</td><td data-label="Sensor">${sensorText(report)}</td></tr>`,
  )}</tbody></table></div>
${points.flatMap(({ point, plan }) => plan.warnings.map((warning) => html`<p class="note">${point.key}: ${warning}</p>`))}`;
}

function velocityText({ plan }: PointReport): string {
  const { fmaxHz, lines: count, averages, window, factor } = plan.spectrum;
  return `to ${Number(fmaxHz.toFixed(1))} Hz, ${count} lines, ${averages} averages or more, ${window}, decimated by ${factor}; a record of ${Number((plan.recordSamples / plan.rateHz).toFixed(2))} s every ${Number((plan.stepSamples / plan.rateHz).toFixed(2))} s`;
}

function envelopeText({ plan }: PointReport): string {
  if (plan.envelope === null) return 'none';
  const { bandHz, auto, fmaxHz, lines: count, averages } = plan.envelope;
  const band = `${bandHz[0]}–${bandHz[1]} Hz`;
  return `${auto ? `band chosen by spectral kurtosis within ${band}` : band}, to ${Number(fmaxHz.toFixed(1))} Hz, ${count} lines, ${averages} averages or more`;
}

function shaftText({ machine, point }: PointReport): string {
  const { shaft } = machine;
  const ratio = point.ratio === 1 ? '' : `, times ${point.ratio} here`;
  switch (shaft?.kind) {
    case undefined:
      return 'no speed configured';
    case 'fixed':
      return `${Number(shaft.rpm.toFixed(1))} r/min${shaft.tolerancePct === 0 ? '' : ` ± ${shaft.tolerancePct} %`}${ratio}`;
    case 'range':
      return `${shaft.rpmRange[0]} to ${shaft.rpmRange[1]} r/min${ratio}`;
    case 'tachometer':
      return `tachometer ${shaft.link}/${shaft.channel}, ${shaft.pulsesPerRev} pulses a turn${ratio}`;
    case 'mqtt':
      return `told on ${shaft.topic}${ratio}`;
  }
}

function bearingText({ point, plan }: PointReport): string {
  if (point.bearings.length === 0) return 'none';
  return plan.bearings
    .map(({ id, multiples }) => {
      if (multiples === null) return `${id}: nothing known`;
      const { bpfo, bpfi, bsf, ftf, certain } = multiples;
      const round = (value: number) => Number(value.toFixed(4));
      return `${id}: BPFO ${round(bpfo)}, BPFI ${round(bpfi)}, BSF ${round(bsf)}, FTF ${round(ftf)} per turn${certain ? '' : ' (rules of thumb)'}`;
    })
    .join('; ');
}

function sensorText({ point }: PointReport): string {
  const { usableHz, rangeG, mount } = point.sensor;
  const known = [
    usableHz && `usable ${usableHz[0]}–${usableHz[1]} Hz`,
    rangeG && `±${rangeG} g`,
    mount && `mounted by ${mount}`,
  ].filter((text) => text !== null);
  return known.length === 0 ? 'nothing stated' : known.join(', ');
}
