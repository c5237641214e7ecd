/** What all charts share: their frame, axes, buttons that zoom, a size that follows the page. */

import { stepped } from './figures.js';

/** @typedef {import('./types.d.ts').ChartHost} ChartHost */
/** @typedef {import('./types.d.ts').ZoomSettings} ZoomSettings */
/** @typedef {import('./types.d.ts').Plot} Plot */

export const ink = '#17222b';
export const soft = '#5a6772';
export const trace = '#1d4e63';
const grid = '#e3e5df';
const font = '12px system-ui, "DejaVu Sans", sans-serif';
/** Width of a printed page's text. */
const printWidth = 700;

/** @type {{ plot: Plot, host: ChartHost }[]} */
const charts = [];

/**
 * @param {HTMLElement} figure
 * @returns {ChartHost}
 */
export function frameOf(figure) {
  const make = (/** @type {string} */ name) => {
    const part = document.createElement('div');
    part.className = name;
    figure.append(part);
    return part;
  };
  const host = { figure, tools: make('tools'), plot: make('plot'), readout: make('readout') };
  host.plot.tabIndex = 0;
  host.plot.setAttribute('role', 'application');
  host.plot.setAttribute('aria-label', figure.querySelector('figcaption b')?.textContent ?? 'chart');
  host.readout.setAttribute('role', 'status');
  return host;
}

/**
 * @param {ChartHost} host
 * @param {string} label
 * @param {string} title
 * @param {() => void} action
 * @returns {HTMLButtonElement}
 */
export function button(host, label, title, action) {
  const made = document.createElement('button');
  made.type = 'button';
  made.textContent = label;
  made.title = title;
  made.setAttribute('aria-label', title);
  made.addEventListener('click', action);
  host.tools.append(made);
  return made;
}

/**
 * A button that stays down.
 * @param {ChartHost} host
 * @param {string} label
 * @param {string} title
 * @param {boolean} down
 * @param {(down: boolean) => void} action
 * @returns {HTMLButtonElement}
 */
export function toggle(host, label, title, down, action) {
  let on = down;
  const made = button(host, label, title, () => {
    on = !on;
    made.setAttribute('aria-pressed', String(on));
    action(on);
  });
  made.setAttribute('aria-pressed', String(on));
  return made;
}

/**
 * @param {import('uplot').Axis.Label} label
 * @param {Partial<import('uplot').Axis>} more
 * @returns {import('uplot').Axis}
 */
export function axis(label, more = {}) {
  return {
    label,
    labelFont: font,
    labelSize: 16,
    labelGap: 0,
    size: 30,
    font,
    stroke: soft,
    grid: { stroke: grid, width: 1 },
    ticks: { stroke: grid, width: 1, size: 5 },
    values: (_, ticks, __, ___, step) => ticks.map((tick) => stepped(tick, step)),
    ...more,
  };
}

/**
 * @param {ChartHost} host
 * @param {number} height
 * @returns {{ width: number, height: number }}
 */
export function sizeOf(host, height) {
  return { width: Math.max(260, host.plot.clientWidth), height };
}

/**
 * Lets the chart follow the page, and be as wide as paper when it is printed.
 * @param {ChartHost} host
 * @param {Plot} plot
 */
export function follow(host, plot) {
  charts.push({ plot, host });
  new ResizeObserver(() => {
    const size = sizeOf(host, plot.height);
    if (size.width !== plot.width) plot.setSize(size);
  }).observe(host.plot);
}

/** @param {boolean} printing */
export function fitPaper(printing) {
  for (const { plot, host } of charts) {
    plot.setSize(printing ? { width: printWidth, height: plot.height } : sizeOf(host, plot.height));
  }
}

/**
 * Buttons and keys that zoom and move along x.
 * @param {ChartHost} host
 * @param {Plot} plot
 * @param {ZoomSettings} settings
 */
export function zoomTools(host, plot, { whole, least, centre }) {
  const [first, last] = whole;
  const range = () => ({ min: plot.scales.x?.min ?? first, max: plot.scales.x?.max ?? last });
  const show = (/** @type {number} */ min, /** @type {number} */ span) => {
    const width = Math.min(last - first, Math.max(least, span));
    const from = Math.min(last - width, Math.max(first, min));
    plot.setScale('x', { min: from, max: from + width });
  };
  const zoom = (/** @type {number} */ factor) => {
    const { min, max } = range();
    const pinned = centre();
    const middle = pinned !== null && pinned >= min && pinned <= max ? pinned : (min + max) / 2;
    show(middle - (middle - min) * factor, (max - min) * factor);
  };
  const move = (/** @type {number} */ share) => {
    const { min, max } = range();
    show(min + share * (max - min), max - min);
  };
  button(host, '+', 'Zoom in', () => zoom(0.25));
  button(host, '−', 'Zoom out', () => zoom(4));
  button(host, '‹', 'Move left', () => move(-0.5));
  button(host, '›', 'Move right', () => move(0.5));
  button(host, 'All', 'Show the whole', () => show(first, last - first));
  plot.over.addEventListener('dblclick', () => show(first, last - first));
  host.plot.addEventListener('keydown', (event) => {
    if (event.key === '+') zoom(0.25);
    else if (event.key === '-') zoom(4);
    else if (event.key === '0') show(first, last - first);
  });
}

/**
 * Calls back for a click that was no drag, with the place along x in CSS pixels.
 * @param {Plot} plot
 * @param {(left: number) => void} action
 */
export function onClick(plot, action) {
  let downX = 0;
  plot.over.addEventListener('mousedown', (event) => {
    downX = event.clientX;
  });
  plot.over.addEventListener('click', (event) => {
    if (Math.abs(event.clientX - downX) > 3) return;
    action(event.clientX - plot.over.getBoundingClientRect().left);
  });
}

/**
 * @param {HTMLElement} readout
 * @param {string[]} parts the first in bold
 */
export function say(readout, parts) {
  readout.replaceChildren();
  const [first, ...rest] = parts;
  if (first === undefined) return;
  const bold = document.createElement('b');
  bold.textContent = first;
  readout.append(bold, rest.map((part) => ` · ${part}`).join(''));
}
