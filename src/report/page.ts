/** The page: one file that needs nothing else, opens from disk and lets nothing in or out. */

import { createHash } from 'node:crypto';
import { readFileSync } from 'node:fs';
import { createRequire } from 'node:module';
import { clientScript } from './client-script.ts';
import { alarms, settings } from './closing.ts';
import { html, scriptJson } from './markup.ts';
import type { PointReport, ReportModel } from './model.ts';
import { findings, levels, trust, verdicts } from './overview.ts';
import { pointSection } from './point-section.ts';
import { packFloats } from './samples.ts';
import type { Curve } from './spectra.ts';
import { style } from './style.ts';
import { seconds, time } from './words.ts';

/** The whole HTML text. */
export function reportPage(model: ReportModel): string {
  const { input, machines, points } = model;
  const { station, fileName, start } = input;
  const names = machines.map(({ machine }) => machine.name).join(', ');
  const require = createRequire(import.meta.url);
  const plotScript = readFileSync(require.resolve('uplot/dist/uPlot.iife.min.js'), 'utf8');
  const plotStyle = readFileSync(require.resolve('uplot/dist/uPlot.min.css'), 'utf8');
  const script = `${plotScript}\n${clientScript()}`;
  const hash = createHash('sha256').update(script, 'utf8').digest('base64');
  const policy =
    `default-src 'none'; script-src 'sha256-${hash}'; style-src 'unsafe-inline'; ` +
    "base-uri 'none'; form-action 'none'";
  const body = html`<header>
<h1>Vibration of ${names}</h1>
<p class="lead">${station.site.name}${start === null ? '' : ` · ${time(start)}`} · ${seconds(model.seconds)} · ${fileName}</p>
<p class="caution"><b>Advice only.</b> This report is no machine protection, and no trip may depend on it. Before anyone works on the machine it is isolated and locked by the local procedure.</p>
${verdicts(model)}
</header>
<nav aria-label="Parts of this report"><div><a href="#findings">Findings</a><a href="#trust">Trust</a><a href="#levels">Levels</a>${points.map(
    ({ point }, k) => html`<a href="#point-${k}">${point.key}</a>`,
  )}<a href="#alarms">Alarms</a><a href="#settings">Settings</a></div></nav>
<main>
<h2 id="findings">Likely faults and their evidence</h2>${findings(model)}
<h2 id="trust">What was measured, and how far to trust it</h2>${trust(model)}
<h2 id="levels">Levels and zones</h2><div class="levels-grid">${levels(model)}</div>
${points.map(pointSection)}
<h2 id="alarms">Alarms</h2>${alarms(model)}
<h2 id="settings">Settings used</h2>${settings(model)}
</main>
<footer>Velocity and spectra are RMS unless said otherwise; 1 g = 9.80665 m/s². Decibels: 20·log10 against 1 mm/s and 1 g, 10·log10 against 1 g². Charts: drag or the buttons zoom, a click pins the cursor, arrow keys move it, Escape frees it.</footer>`;
  const title = html`${names} – ${station.site.name}`;
  return `<!doctype html>
<html lang="en"><head><meta charset="utf-8">
<meta http-equiv="Content-Security-Policy" content="${policy}">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta name="referrer" content="no-referrer">
<title>${title.text}</title>
<style>${plotStyle}${style}</style></head>
<body>
${body.text}
<script type="application/json" id="report-data">${scriptJson(clientData(model))}</script>
<script>${script}</script>
</body></html>
`;
}

/** What the charts are drawn from. Keys are those that client/types.d.ts declares. */
function clientData({ input, points }: ReportModel): unknown {
  return {
    rateHz: input.rate.hz,
    frames: input.recording.frames,
    points: points.map((point) => ({
      key: point.point.key,
      shaftHz: point.shown.reading.shaft.hz,
      scale: point.scale,
      samples: point.samples,
      recordS: point.recordS,
      velocity: spectrumData(point.curves.velocity, point.marks.velocity),
      acceleration: spectrumData(point.curves.acceleration, point.marks.acceleration),
      envelope: spectrumData(point.curves.envelope, point.marks.envelope),
      defect: point.shown.reading.envelope?.defect ?? null,
      cascade: cascadeData(point),
    })),
  };
}

function spectrumData(curve: Curve | null, marks: PointReport['marks']['velocity']): unknown {
  if (curve === null) return null;
  const { stepHz, lineHz, window, values } = curve;
  return { stepHz, lineHz, window, values: packFloats(values), marks };
}

function cascadeData({ cascade }: PointReport): unknown {
  return cascade && { ...cascade, values: packFloats(cascade.values) };
}
