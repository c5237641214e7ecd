/** Fills in the charts of the page as they come into view, and all of them before it is printed. */

import { cascadeChart } from './cascade.js';
import { fitPaper } from './chart.js';
import { spectrumChart } from './spectrum.js';
import { waveformChart } from './waveform.js';

/** @type {import('./types.d.ts').ReportData} */
const report = JSON.parse(document.getElementById('report-data')?.textContent ?? '{}');

/** What a defect shows beside its own family. */
const families = new Map([
  ['outer', ['outer']],
  ['inner', ['inner', 'shaft']],
  ['rolling-element', ['rolling-element', 'cage']],
  ['cage', ['cage']],
  ['cage-rate', ['cage']],
]);

/** @param {HTMLElement} figure */
function fill(figure) {
  if (figure.dataset.filled) return;
  figure.dataset.filled = 'yes';
  const point = report.points[Number(figure.dataset.point)];
  if (point === undefined) return;
  const { shaftHz, velocity, acceleration, envelope, cascade, defect } = point;
  const kind = figure.dataset.chart;
  const orders = ['shaft', 'vanes', 'mains'];
  if (kind === 'waveform') waveformChart(figure, point, report);
  if (kind === 'velocity' && velocity) {
    spectrumChart(figure, velocity, { unit: 'mm/s', factor: 20, on: orders, shaftHz });
  }
  if (kind === 'acceleration' && acceleration) {
    spectrumChart(figure, acceleration, { unit: 'g', factor: 20, on: ['vanes', 'mains'], shaftHz });
  }
  if (kind === 'envelope' && envelope) {
    const on = families.get(defect ?? '') ?? ['shaft', 'outer', 'inner'];
    spectrumChart(figure, envelope, { unit: 'g²', factor: 10, on, shaftHz });
  }
  if (kind === 'cascade' && cascade) cascadeChart(figure, cascade);
}

const figures = [...document.querySelectorAll('figure.chart')].filter((one) => one instanceof HTMLElement);
const watcher = new IntersectionObserver(
  (entries) => {
    for (const { isIntersecting, target } of entries) {
      if (!isIntersecting || !(target instanceof HTMLElement)) continue;
      watcher.unobserve(target);
      fill(target);
    }
  },
  { rootMargin: '600px' },
);
for (const figure of figures) watcher.observe(figure);

addEventListener('beforeprint', () => {
  for (const figure of figures) fill(figure);
  for (const part of document.querySelectorAll('details')) part.open = true;
  fitPaper(true);
});
addEventListener('afterprint', () => fitPaper(false));
