/**
 * The open recordings beside the checkout (bearing data of Case Western Reserve University and of MFPT, none of which
 * is part of this repository) through `forebay replay`, by scripts/score.mjs. Needs dist/: `npm run build`.
 */
import { spawnSync } from 'node:child_process';
import { fileURLToPath } from 'node:url';
import { beforeAll, describe, expect, it } from 'vitest';
import { recordingsFolder } from '../support/tools.ts';

interface Score {
  total: { records: number; right: number; wrong: number; missed: number; false: number; healthy: number };
  rows: { name: string; outcome: string; verdict: string | null; other: string | null }[];
  figures: { figure: string; measured: number; worst: { name: string; off: number }[] }[];
}

const folder = recordingsFolder();
if (folder === null)
  console.log('NOT TESTED: verdicts on open recordings (no ../shared/data beside the checkout)');

describe.runIf(folder !== null)('recordings with known faults', () => {
  let score: Score;

  beforeAll(() => {
    const script = fileURLToPath(new URL('../../scripts/score.mjs', import.meta.url));
    const { stdout, stderr, status } = spawnSync(process.execPath, [script, folder!, '--json'], {
      encoding: 'utf8',
    });
    if (status !== 0) throw new Error(`${script}: ${stderr}`);
    score = JSON.parse(stdout);
    const { total } = score;
    console.log(
      `recordings: ${total.right} right of ${total.records}, ${total.wrong} wrong, ${total.missed} missed; ${total.false} false of ${total.healthy}`,
    );
  }, 180_000);

  it('names the fault of most and hardly ever another one', () => {
    expect(score.total.records).toBeGreaterThanOrEqual(44);
    expect(score.total.right).toBeGreaterThanOrEqual(31);
    expect(score.total.wrong).toBeLessThanOrEqual(1);
  });

  it('accuses no bearing of the rig that was sound', () => {
    expect(score.total.healthy).toBeGreaterThanOrEqual(39);
    expect(score.rows.filter(({ other }) => other !== null)).toEqual([]);
  });

  it('agrees with an independent analysis (scipy) on the figures of the acceleration', () => {
    // 1e-4 is what that analysis asks for; nothing but rounding differs.
    for (const name of ['acc_rms_g', 'acc_peak_g', 'crest_factor', 'kurtosis']) {
      const figure = score.figures.find((f) => f.figure === name)!;
      expect(figure.measured).toBeGreaterThanOrEqual(40);
      expect(Math.abs(figure.worst[0]!.off)).toBeLessThan(1e-9);
    }
  });
});
