/** A spectrum: linear or in decibels, with named frequencies, a cursor, and harmonics of the cursor. */

import { axis, button, follow, frameOf, onClick, say, sizeOf, toggle, trace, zoomTools } from './chart.js';
import { floatsOf } from './decode.js';
import { betweenBins, decibel, placed, significant } from './figures.js';
import { drawMarks, familiesOf, lookOf, nearestMark } from './marks.js';

/** How far the cursor reaches for the highest line, in CSS pixels. */
const snapPixels = 6;
const mostHarmonics = 20;
/** What a decibel scale shows below its highest line. */
const spanDb = 80;

/**
 * @typedef {object} SpectrumLooks
 * @property {string} unit
 * @property {10 | 20} factor of its decibels
 * @property {string[]} on families that are marked at first
 * @property {number | null} shaftHz
 */

/**
 * @param {HTMLElement} figure
 * @param {import('./types.d.ts').SpectrumData} data
 * @param {SpectrumLooks} looks
 */
export function spectrumChart(figure, data, { unit, factor, on, shaftHz }) {
  const host = frameOf(figure);
  const { stepHz, marks } = data;
  const linear = floatsOf(data.values);
  const inDecibels = Float32Array.from(linear, (value) => decibel(value, factor));
  const hz = Float64Array.from(linear, (_, bin) => bin * stepHz);
  const lastHz = (linear.length - 1) * stepHz;
  const families = new Set(on);
  let isDecibel = false;
  let withHarmonics = false;
  /** @type {number | null} */
  let bin = null;
  let isPinned = false;

  const plot = new uPlot(
    {
      ...sizeOf(host, 290),
      legend: { show: false },
      cursor: { y: false, x: false, points: { show: false }, drag: { x: true, y: false, dist: 4 } },
      scales: {
        x: { time: false },
        y: {
          range: (_, __, most) =>
            isDecibel ? [(most ?? 0) - spanDb, (most ?? 0) + 8] : [0, 1.25 * (most || 1)],
        },
      },
      axes: [axis('Hz'), axis(() => (isDecibel ? `dB re 1 ${unit}` : unit), { size: 66 })],
      series: [{}, { stroke: trace, width: 1.2, points: { show: false } }],
      hooks: {
        drawAxes: [(u) => drawMarks(u, marks, families)],
        draw: [() => showCursor()],
        setCursor: [
          (u) => {
            const { left } = u.cursor;
            if (isPinned) return;
            bin = left !== undefined && left >= 0 ? highestNear(left) : null;
            showCursor();
          },
        ],
      },
    },
    [hz, linear],
    host.plot,
  );

  const layer = document.createElement('div');
  plot.over.append(layer);

  /** @param {number} left @returns {number} */
  function highestNear(left) {
    const at = (/** @type {number} */ pixels) =>
      Math.min(linear.length - 2, Math.max(1, Math.round(plot.posToVal(pixels, 'x') / stepHz)));
    let best = at(left);
    for (let k = at(left - snapPixels); k <= at(left + snapPixels); k++) {
      if (/** @type {number} */ (linear[k]) > /** @type {number} */ (linear[best])) best = k;
    }
    return best;
  }

  /**
   * The line about a bin; the bin itself where none stands there.
   * @param {number} k
   */
  function lineAt(k) {
    const [left = 0, centre = 0, right = 0] = linear.subarray(k - 1, k + 2);
    if (data.window !== 'hann') return { hz: k * stepHz, value: centre };
    const { offset, height } = betweenBins(left, centre, right, stepHz / data.lineHz);
    return { hz: (k + offset) * stepHz, value: height };
  }

  /** @param {number} at frequency, Hz @param {string} name @param {string} text */
  function upright(at, name, text) {
    const { min = 0, max = 0 } = plot.scales.x ?? {};
    if (at < min || at > max) return;
    const line = document.createElement('div');
    line.className = name;
    line.style.left = `${plot.valToPos(at, 'x')}px`;
    if (text !== '') {
      const label = document.createElement('em');
      label.textContent = text;
      line.append(label);
    }
    layer.append(line);
  }

  function showCursor() {
    if (layer === undefined) return;
    layer.replaceChildren();
    if (bin === null) {
      say(host.readout, []);
      return;
    }
    const { hz: at, value } = lineAt(bin);
    if (withHarmonics) {
      for (let k = 2; k <= mostHarmonics && k * at <= lastHz; k++) upright(k * at, 'pin harmonic', `${k}`);
    }
    upright(at, 'pin', '');
    const { min = 0, max = 0 } = plot.scales.x ?? {};
    if (at >= min && at <= max) {
      const dot = document.createElement('div');
      dot.className = 'dot';
      dot.style.left = `${plot.valToPos(at, 'x')}px`;
      dot.style.top = `${plot.valToPos(isDecibel ? decibel(value, factor) : value, 'y')}px`;
      layer.append(dot);
    }
    const parts = [`${placed(at, stepHz / 10)} Hz`];
    if (shaftHz !== null) parts.push(`order ${(at / shaftHz).toFixed(3)}`);
    parts.push(`${significant(value)} ${unit}`, `${decibel(value, factor).toFixed(1)} dB`);
    const near = nearestMark(marks, at, 1.5 * stepHz);
    if (near !== null) parts.push(near.bearing === undefined ? near.name : `${near.name} of ${near.bearing}`);
    if (isPinned) parts.push('pinned');
    say(host.readout, parts);
  }

  /** @param {number | null} to */
  function pin(to) {
    bin = to;
    isPinned = to !== null;
    showCursor();
  }

  onClick(plot, (left) => pin(highestNear(left)));
  host.plot.addEventListener('keydown', (event) => {
    if (event.key === 'Escape') pin(null);
    const step = event.key === 'ArrowLeft' ? -1 : event.key === 'ArrowRight' ? 1 : 0;
    if (step === 0) return;
    event.preventDefault();
    const from = bin ?? Math.round((shaftHz ?? lastHz / 2) / stepHz);
    pin(Math.min(linear.length - 2, Math.max(1, from + step * (event.shiftKey ? 10 : 1))));
  });
  zoomTools(host, plot, {
    whole: [0, lastHz],
    least: 20 * stepHz,
    centre: () => (isPinned && bin !== null ? lineAt(bin).hz : null),
  });
  toggle(host, 'dB', 'Decibels instead of a linear scale', false, (down) => {
    isDecibel = down;
    plot.setData([hz, isDecibel ? inDecibels : linear], false);
    const { min = 0, max = lastHz } = plot.scales.x ?? {};
    plot.setScale('x', { min, max });
  }).classList.add('apart');
  toggle(host, 'Harmonics', 'Mark the multiples of the cursor', false, (down) => {
    withHarmonics = down;
    showCursor();
  });
  familiesOf(marks).forEach((family, k) => {
    const look = lookOf(family);
    const made = toggle(host, look.title, `Mark: ${look.title}`, families.has(family), (down) => {
      if (down) families.add(family);
      else families.delete(family);
      plot.redraw(false);
    });
    const key = document.createElement('span');
    key.className = 'key';
    key.style.borderTopColor = look.colour;
    key.style.borderTopStyle =
      look.dash.length === 0 ? 'solid' : (look.dash[0] ?? 0) < 4 ? 'dotted' : 'dashed';
    made.prepend(key);
    if (k === 0) made.classList.add('apart');
  });
  if (shaftHz !== null) {
    button(host, 'to 10x', 'Show up to the tenth order', () => {
      plot.setScale('x', { min: 0, max: Math.min(lastHz, 10.5 * shaftHz) });
    });
  }
  follow(host, plot);
}
