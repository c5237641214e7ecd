/** Acceleration over time, from the whole recording down to single samples. */

import { axis, follow, frameOf, onClick, say, sizeOf, trace, zoomTools } from './chart.js';
import { integersOf } from './decode.js';
import { placed, significant } from './figures.js';
import { Pyramid } from './pyramid.js';

/** Fewest samples that fill the chart. */
const leastSamples = 16;

/**
 * @param {HTMLElement} figure
 * @param {import('./types.d.ts').PointData} point
 * @param {{ rateHz: number, frames: number }} recording
 */
export function waveformChart(figure, point, { rateHz, frames }) {
  const host = frameOf(figure);
  const { samples, scale, recordS } = point;
  const pyramid = new Pyramid(integersOf(samples.base64, samples.bytesPerValue), samples.block, frames);
  const inG = (/** @type {number} */ count) => (count - scale.meanCounts) * scale.gPerCount;
  const lastS = (frames - 1) / rateHz;
  /** @type {number | null} */
  let pinned = null;

  /** @param {import('./types.d.ts').Plot} plot */
  const fitHeight = (plot) => {
    const { min = 0, max = lastS } = plot.scales.x ?? {};
    const { low, high } = pyramid.extremes(Math.floor(min * rateHz), Math.ceil(max * rateHz) + 1);
    const [bottom, top] = [inG(low), inG(high)];
    const margin = Math.max(0.06 * (top - bottom), scale.gPerCount);
    plot.setScale('y', { min: bottom - margin, max: top + margin });
  };

  const plot = new uPlot(
    {
      ...sizeOf(host, 230),
      legend: { show: false },
      cursor: { y: false, points: { show: false }, drag: { x: true, y: false, dist: 4 } },
      scales: { x: { time: false }, y: { auto: false } },
      axes: [axis('s'), axis('g', { size: 62 })],
      series: [{}, { paths: () => null, points: { show: false } }],
      hooks: {
        drawClear: [(u) => shadeRecord(u, recordS)],
        draw: [(u) => drawWaveform(u, pyramid, inG, rateHz)],
        setScale: [
          (u, key) => {
            // Within the hook a change of scale would be lost.
            if (key === 'x') queueMicrotask(() => fitHeight(u));
          },
        ],
        setCursor: [
          (u) => {
            const { left } = u.cursor;
            if (left !== undefined && left >= 0) tell(Math.round(u.posToVal(left, 'x') * rateHz));
            else if (pinned === null) say(host.readout, []);
            else tell(pinned);
          },
        ],
      },
    },
    [
      [0, lastS],
      [0, 0],
    ],
    host.plot,
  );

  /** @param {number} at */
  function tell(at) {
    const index = Math.min(frames - 1, Math.max(0, at));
    const { low, high } = pyramid.extremes(index, index + 1);
    const value =
      low === high ? `${significant(inG(low))} g` : `${significant(inG(low))} to ${significant(inG(high))} g`;
    say(host.readout, [`${placed(index / rateHz, 1 / rateHz)} s`, value, `sample ${index}`]);
  }

  plot.setScale('x', { min: 0, max: lastS });
  onClick(plot, (left) => {
    pinned = Math.round(plot.posToVal(left, 'x') * rateHz);
    tell(pinned);
  });
  zoomTools(host, plot, {
    whole: [0, lastS],
    least: (leastSamples * samples.block) / rateHz,
    centre: () => (pinned === null ? null : pinned / rateHz),
  });
  follow(host, plot);
}

/**
 * @param {import('./types.d.ts').Plot} plot
 * @param {[number, number]} recordS
 */
function shadeRecord(plot, [from, to]) {
  const { ctx, bbox } = plot;
  const clip = (/** @type {number} */ x) => Math.min(bbox.left + bbox.width, Math.max(bbox.left, x));
  const left = clip(plot.valToPos(from, 'x', true));
  const right = clip(plot.valToPos(to, 'x', true));
  ctx.save();
  ctx.fillStyle = '#f1f1ea';
  ctx.fillRect(left, bbox.top, right - left, bbox.height);
  ctx.restore();
}

/**
 * One upright a pixel column from its lowest to its highest sample; where samples are wider than pixels, the samples.
 * @param {import('./types.d.ts').Plot} plot
 * @param {Pyramid} pyramid
 * @param {(count: number) => number} inG
 * @param {number} rateHz
 */
function drawWaveform(plot, pyramid, inG, rateHz) {
  const { ctx, bbox } = plot;
  const { min = 0, max = 0 } = plot.scales.x ?? {};
  const first = Math.max(0, Math.floor(min * rateHz));
  const last = Math.min(pyramid.length - 1, Math.ceil(max * rateHz));
  const y = (/** @type {number} */ count) => plot.valToPos(inG(count), 'y', true);
  ctx.save();
  ctx.beginPath();
  ctx.rect(bbox.left, bbox.top, bbox.width, bbox.height);
  ctx.clip();
  ctx.strokeStyle = trace;
  ctx.lineWidth = devicePixelRatio;
  ctx.lineJoin = 'round';
  ctx.beginPath();
  const perColumn = ((max - min) * rateHz) / bbox.width;
  if (perColumn > 1 || pyramid.finest > 1) {
    for (let column = 0; column < bbox.width; column++) {
      const from = Math.round(min * rateHz + column * perColumn);
      if (from > last) break;
      const { low, high } = pyramid.extremes(from, Math.min(last + 1, Math.round(from + perColumn) + 1));
      const x = bbox.left + column + 0.5;
      const top = y(high);
      ctx.moveTo(x, top);
      ctx.lineTo(x, Math.max(top + 1, y(low)));
    }
    ctx.stroke();
  } else {
    const x = (/** @type {number} */ index) => plot.valToPos(index / rateHz, 'x', true);
    for (let index = first; index <= last; index++) ctx.lineTo(x(index), y(pyramid.at(index)));
    ctx.lineWidth = 1.5 * devicePixelRatio;
    ctx.stroke();
    if (perColumn < 0.12) {
      ctx.fillStyle = trace;
      for (let index = first; index <= last; index++) {
        ctx.beginPath();
        ctx.arc(x(index), y(pyramid.at(index)), 2.5 * devicePixelRatio, 0, 2 * Math.PI);
        ctx.fill();
      }
    }
  }
  ctx.restore();
}
