/** Spectra one behind the other over time. */

import { axis, follow, frameOf, say, sizeOf, soft, trace, zoomTools } from './chart.js';
import { floatsOf } from './decode.js';
import { placed, significant } from './figures.js';

/** How many slices' height the highest line takes. */
const rise = 9;

/**
 * @param {HTMLElement} figure
 * @param {import('./types.d.ts').CascadeData} data
 */
export function cascadeChart(figure, data) {
  const host = frameOf(figure);
  const { stepHz, firstHz, bins, timesS } = data;
  const values = floatsOf(data.values);
  const slices = timesS.length;
  const highest = values.reduce((most, value) => Math.max(most, value), 0) || 1;
  const lastHz = firstHz + (bins - 1) * stepHz;
  const [startS = 0] = timesS;
  const endS = timesS[slices - 1] ?? 1;
  const sliceS = (endS - startS) / Math.max(1, slices - 1);

  const plot = new uPlot(
    {
      ...sizeOf(host, 420),
      legend: { show: false },
      cursor: { y: false, points: { show: false }, drag: { x: true, y: false, dist: 4 } },
      scales: {
        x: { time: false },
        y: { auto: false, range: [startS - sliceS, endS + (rise + 1) * sliceS] },
      },
      axes: [
        axis('Hz'),
        axis('s', {
          size: 56,
          values: (_, ticks) => ticks.map((tick) => (tick > endS + sliceS ? '' : `${tick}`)),
        }),
      ],
      series: [{}, { paths: () => null, points: { show: false } }],
      hooks: {
        draw: [draw],
        setCursor: [
          (u) => {
            const { left, top } = u.cursor;
            if (left === undefined || top === undefined || left < 0) {
              say(host.readout, []);
              return;
            }
            const slice = nearest(u.posToVal(top, 'y'));
            const bin = Math.min(
              bins - 1,
              Math.max(0, Math.round((u.posToVal(left, 'x') - firstHz) / stepHz)),
            );
            say(host.readout, [
              `${placed(firstHz + bin * stepHz, stepHz)} Hz`,
              `${(timesS[slice] ?? 0).toFixed(1)} s`,
              `${significant(values[slice * bins + bin] ?? 0)} mm/s`,
            ]);
          },
        ],
      },
    },
    [
      [firstHz, lastHz],
      [0, 0],
    ],
    host.plot,
  );

  /** @param {number} timeS @returns {number} */
  function nearest(timeS) {
    return Math.min(slices - 1, Math.max(0, Math.round((timeS - startS) / sliceS)));
  }

  /** @param {import('./types.d.ts').Plot} u */
  function draw(u) {
    const { ctx, bbox } = u;
    ctx.save();
    ctx.beginPath();
    ctx.rect(bbox.left, bbox.top, bbox.width, bbox.height);
    ctx.clip();
    ctx.lineWidth = 1.2 * devicePixelRatio;
    ctx.lineJoin = 'round';
    const height = rise * (u.valToPos(0, 'y', true) - u.valToPos(sliceS, 'y', true));
    // The last ones are farthest away: drawn first, and covered by what stands before them.
    for (let slice = slices - 1; slice >= 0; slice--) {
      const base = u.valToPos(timesS[slice] ?? 0, 'y', true);
      const line = new Path2D();
      for (let bin = 0; bin < bins; bin++) {
        const value = /** @type {number} */ (values[slice * bins + bin]);
        line.lineTo(u.valToPos(firstHz + bin * stepHz, 'x', true), base - (value / highest) * height);
      }
      const area = new Path2D(line);
      area.lineTo(u.valToPos(lastHz, 'x', true), base);
      area.lineTo(u.valToPos(firstHz, 'x', true), base);
      ctx.fillStyle = '#ffffffd8';
      ctx.fill(area);
      ctx.strokeStyle = slice % 8 === 0 ? trace : soft;
      ctx.stroke(line);
    }
    ctx.restore();
  }

  zoomTools(host, plot, { whole: [firstHz, lastHz], least: 16 * stepHz, centre: () => null });
  follow(host, plot);
}
