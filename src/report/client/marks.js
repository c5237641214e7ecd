/** Named frequencies over a spectrum: which families there are, and how each is drawn. */

import { ink } from './chart.js';

/** @typedef {import('./types.d.ts').MarkData} MarkData */
/** @typedef {import('./types.d.ts').Plot} Plot */

/** A colour and a dash pattern each, so that they are told apart in grey too. */
const looks = new Map([
  ['shaft', { title: 'shaft', colour: '#a6480f', dash: [7, 3] }],
  ['vanes', { title: 'vane pass', colour: '#4c6b12', dash: [2, 3] }],
  ['mains', { title: 'mains', colour: '#6b3f91', dash: [9, 3, 2, 3] }],
  ['outer', { title: 'outer race', colour: '#00697a', dash: [4, 1] }],
  ['inner', { title: 'inner race', colour: '#8d1d4f', dash: [5, 2] }],
  ['rolling-element', { title: 'rolling element', colour: '#3c55a5', dash: [9, 3, 2, 3] }],
  ['cage', { title: 'cage', colour: '#6a5a00', dash: [2, 2] }],
]);

const labelFont = '600 11px system-ui, "DejaVu Sans", sans-serif';
const labelRows = 3;
const rowHeight = 14;

/** @param {string} family */
export function lookOf(family) {
  return looks.get(family) ?? { title: family, colour: ink, dash: [] };
}

/**
 * The families present, in the order of the table above.
 * @param {MarkData[]} marks
 * @returns {string[]}
 */
export function familiesOf(marks) {
  return [...looks.keys()].filter((family) => marks.some((mark) => mark.family === family));
}

/** @param {MarkData} mark @returns {string} */
function labelOf(mark) {
  return mark.found === false ? `(${mark.name})` : mark.name;
}

/**
 * Draws those of the families that are on: lines, and names in rows where there is room, main ones first.
 * @param {Plot} plot
 * @param {MarkData[]} marks
 * @param {Set<string>} on
 */
export function drawMarks(plot, marks, on) {
  const { ctx, bbox } = plot;
  const ratio = devicePixelRatio;
  const { min = 0, max = 0 } = plot.scales.x ?? {};
  const shown = marks.filter(({ family, hz }) => on.has(family) && hz >= min && hz <= max);
  const order = ['main', 'harmonic', 'sideband'];
  shown.sort((a, b) => order.indexOf(a.kind) - order.indexOf(b.kind));
  ctx.save();
  ctx.beginPath();
  ctx.rect(bbox.left, bbox.top, bbox.width, bbox.height);
  ctx.clip();
  ctx.font = labelFont.replace('11px', `${11 * ratio}px`);
  ctx.textBaseline = 'top';
  ctx.textAlign = 'left';
  /** @type {[number, number][][]} */
  const taken = Array.from({ length: labelRows }, () => []);
  for (const mark of shown) {
    const look = lookOf(mark.family);
    const x = Math.round(plot.valToPos(mark.hz, 'x', true)) + 0.5;
    ctx.globalAlpha = mark.kind === 'sideband' ? 0.55 : 0.9;
    ctx.strokeStyle = look.colour;
    ctx.lineWidth = (mark.kind === 'main' ? 1.5 : 1) * ratio;
    ctx.setLineDash(look.dash.map((length) => length * ratio));
    const label = labelOf(mark);
    const width = ctx.measureText(label).width + 6 * ratio;
    const left = x + width > bbox.left + bbox.width ? x - width : x + 2 * ratio;
    const row = taken.findIndex((spans) => spans.every(([a, b]) => left + width < a || left > b));
    const top = row < 0 ? bbox.top + labelRows * rowHeight * ratio : bbox.top + row * rowHeight * ratio;
    ctx.beginPath();
    ctx.moveTo(x, top);
    ctx.lineTo(x, bbox.top + bbox.height);
    ctx.stroke();
    if (row < 0) continue;
    taken[row]?.push([left, left + width]);
    ctx.globalAlpha = 1;
    ctx.fillStyle = '#ffffffd0';
    ctx.fillRect(left - ratio, top, width - 2 * ratio, (rowHeight - 1) * ratio);
    ctx.fillStyle = look.colour;
    ctx.fillText(label, left, top + 1.5 * ratio);
  }
  ctx.restore();
}

/**
 * The mark nearest to a frequency, where one is within reach.
 * @param {MarkData[]} marks
 * @param {number} hz
 * @param {number} reachHz
 * @returns {MarkData | null}
 */
export function nearestMark(marks, hz, reachHz) {
  /** @type {MarkData | null} */
  let best = null;
  for (const mark of marks) {
    const away = Math.abs(mark.hz - hz);
    if (away <= reachHz && (best === null || away < Math.abs(best.hz - hz))) best = mark;
  }
  return best;
}
