/** A report in a browser: it opens from disk without the network, shows its numbers, zooms, and its cursors tell. */
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import type { BrowserContext, Locator, Page } from 'playwright-core';
import { chromium } from 'playwright-core';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { hasTool } from '../support/tools.ts';
import { demoData, demoStation, figuresOf, removeFolder, report, snapshot, tags, tone } from './rig.ts';

const haveChromium = hasTool('chromium');
if (!haveChromium) console.log('chromium is not here, so reports are not tried in a browser');

const flags = [
  '--no-sandbox',
  '--disable-gpu',
  '--no-first-run',
  '--disable-background-networking',
  '--disable-component-update',
  '--disable-sync',
];

afterAll(removeFolder);

describe.runIf(haveChromium)('a report in a browser', { timeout: 60_000 }, () => {
  const profile = mkdtempSync(join(tmpdir(), 'forebay-chromium-'));
  let browser: BrowserContext;
  let requests: string[] = [];
  let complaints: string[] = [];

  beforeAll(async () => {
    browser = await chromium.launchPersistentContext(profile, {
      executablePath: '/usr/bin/chromium',
      headless: true,
      args: flags,
    });
  }, 60_000);

  afterAll(async () => {
    await browser?.close();
    rmSync(profile, { recursive: true, force: true });
  });

  async function open(path: string, width = 1280): Promise<Page> {
    requests = [];
    complaints = [];
    const page = await browser.newPage();
    page.on('request', (request) => requests.push(request.url()));
    page.on('console', (message) => complaints.push(`${message.type()}: ${message.text()}`));
    page.on('pageerror', (error) => complaints.push(error.message));
    await page.setViewportSize({ width, height: 900 });
    await page.goto(`file://${path}`);
    return page;
  }

  /** A chart of the first point, drawn. */
  async function chart(page: Page, kind: string) {
    const figure = page.locator(`figure[data-chart=${kind}][data-point="0"]`);
    await figure.scrollIntoViewIfNeeded();
    await figure.locator('.u-over').waitFor();
    return {
      figure,
      readout: figure.locator('.readout'),
      over: figure.locator('.u-over'),
      press: (name: string) => figure.getByRole('button', { name, exact: true }).click(),
      /** The picture as the browser painted it. */
      picture: () => figure.locator('canvas').screenshot(),
    };
  }

  const textOf = async (part: Locator) => (await part.textContent()) ?? '';
  const firstNumber = async (part: Locator) => Number(/-?[\d.]+/.exec(await textOf(part))?.[0]);

  it('asks for nothing but itself, complains of nothing, and fits each width', async () => {
    const { path } = await report({ file: join(demoData, 'outer.flac'), config: demoStation });
    for (const width of [1280, 800, 360]) {
      const page = await open(path, width);
      for (const kind of ['waveform', 'velocity', 'acceleration', 'envelope']) await chart(page, kind);
      const wider = await page.evaluate('document.documentElement.scrollWidth - innerWidth');
      expect(wider, `${width} px`).toBeLessThanOrEqual(0);
      expect(requests).toEqual([`file://${path}`]);
      expect(complaints).toEqual([]);
      await page.close();
    }
  });

  it('shows every figure to the reader', async () => {
    const { path, text } = await report({ file: join(demoData, 'outer.flac'), config: demoStation });
    const page = await open(path);
    const figures = figuresOf(text);
    expect(figures.size).toBeGreaterThan(100);
    const shown = page.locator('[data-figure="pump-3/motor-de-h/velocity.overall"]');
    expect(await textOf(shown.first())).toBe(figures.get('pump-3/motor-de-h/velocity.overall'));
    for (const words of ['accuses the outer race', 'BPFO', 'bearing, outer race', 'Advice only.']) {
      expect(await page.getByText(words).first().isVisible(), words).toBe(true);
    }
    await page.close();
  });

  it('zooms the waveform from the whole record to single samples and back', async () => {
    // An offset, as every sensor's gravity or bias makes one.
    const counts = tone(25, 0.5, 5).map((count) => count + 3000);
    const file = await snapshot('zoom.flac', [counts], tags());
    const { path } = await report({ file, config: demoStation });
    const page = await open(path);
    const { figure, readout, over, press, picture } = await chart(page, 'waveform');
    const whole = await picture();
    // Pinned in the middle, then in by four until nothing more is hidden.
    await over.click();
    const pinned = Number(/sample (\d+)/.exec(await textOf(readout))![1]);
    expect(pinned / counts.length).toBeCloseTo(0.5, 2);
    for (let k = 0; k < 7; k++) await press('Zoom in');
    const box = (await over.boundingBox())!;
    // 128 000 samples by 4^7 is below the 16 that always remain: about one each sixteenth of the width.
    const seen: number[] = [];
    for (let k = 0; k < 5; k++) {
      await page.mouse.move(box.x + box.width * (0.5 + k / 16), box.y + 40);
      const said = /^([\d.]+) s · ([-\d.e]+) g · sample (\d+)/.exec(await textOf(readout))!;
      seen.push(Number(said[3]));
      const mean = counts.reduce((sum, count) => sum + count, 0) / counts.length;
      expect(Number(said[2])).toBeCloseTo((counts[Number(said[3])]! - mean) / 2048, 3);
      expect(Number(said[1])).toBeCloseTo(Number(said[3]) / 25_600, 6);
    }
    expect(seen.map((index) => index - seen[0]!)).toEqual([0, 1, 2, 3, 4]);
    expect((await picture()).equals(whole)).toBe(false);
    await press('Show the whole');
    await page.mouse.move(0, 0);
    await expect.poll(async () => (await picture()).equals(whole)).toBe(true);
    // Dragging zooms as well.
    await page.mouse.move(box.x + 100, box.y + 50);
    await page.mouse.down();
    await page.mouse.move(box.x + 200, box.y + 50, { steps: 4 });
    await page.mouse.up();
    await page.mouse.move(box.x + 1, box.y + 50);
    await expect.poll(() => firstNumber(readout)).toBeCloseTo((5 * 101) / box.width, 1);
    await figure.locator('.u-over').dblclick();
    expect(complaints).toEqual([]);
    await page.close();
  });

  it('reads frequency, order and amplitude at the cursor, and marks its harmonics', async () => {
    // A tone of 0.5 g at 25 Hz, which is the shaft's and a line of this spectrum: 22.07 mm/s RMS by kinematics.
    const hz = 25;
    const file = await snapshot('cursor.flac', [tone(hz, 0.5, 9)], tags());
    const { path } = await report({ file, config: null });
    const page = await open(path);
    const { figure, readout, over, press } = await chart(page, 'velocity');
    await press('Show up to the tenth order');
    const box = (await over.boundingBox())!;
    await over.click({ position: { x: box.width / 10.5 + 2, y: 60 } });
    const said = await textOf(readout);
    expect(await firstNumber(readout)).toBeCloseTo(hz, 1);
    expect(Number(/order ([\d.]+)/.exec(said)![1])).toBeCloseTo(1, 2);
    const mmS = (1000 * 9.80665 * 0.5) / (2 * Math.PI * hz * Math.SQRT2);
    expect(Number(/([\d.]+) mm\/s/.exec(said)![1]) / mmS).toBeCloseTo(1, 2);
    expect(Number(/([\d.]+) dB/.exec(said)![1])).toBeCloseTo(20 * Math.log10(mmS), 1);
    expect(said).toContain('1x');
    expect(await figure.locator('.pin.harmonic').count()).toBe(0);
    await press('Mark the multiples of the cursor');
    // Of the 19 multiples to the twentieth those up to 10.5 are in view.
    expect(await figure.locator('.pin.harmonic').count()).toBe(9);
    await page.keyboard.press('Tab');
    await figure.locator('.plot').focus();
    await page.keyboard.press('ArrowRight');
    await expect.poll(() => firstNumber(readout)).toBeGreaterThan(hz + 0.2);
    await page.keyboard.press('Escape');
    expect(await textOf(readout)).toBe('');
    expect(complaints).toEqual([]);
    await page.close();
  });

  it('reads between the bins what the reading says of the shaft and its first order', async () => {
    const { path, text } = await report({ file: join(demoData, 'unbalance.flac'), config: demoStation });
    const page = await open(path);
    const { readout, over, press } = await chart(page, 'velocity');
    await press('Show up to the tenth order');
    const box = (await over.boundingBox())!;
    await over.click({ position: { x: box.width / 10.5, y: 60 } });
    const said = await textOf(readout);
    const figure = (path: string) => Number(figuresOf(text).get(`pump-3/motor-de-h/${path}`));
    // The spectrum's bins lie 0.625 Hz apart.
    expect(Math.abs((await firstNumber(readout)) - figure('shaft.hz'))).toBeLessThan(0.03);
    expect(Number(/order ([\d.]+)/.exec(said)![1])).toBeCloseTo(1, 2);
    expect(Number(/([\d.]+) mm\/s/.exec(said)![1]) / figure('orders.1.mm_s')).toBeCloseTo(1, 1);
    await page.close();
  });

  it('turns to decibels and back, and takes families of marks away', async () => {
    const { path } = await report({ file: join(demoData, 'inner.flac'), config: demoStation });
    const page = await open(path);
    const { press, picture, figure } = await chart(page, 'envelope');
    const linear = await picture();
    const decibels = figure.getByRole('button', { name: 'Decibels instead of a linear scale' });
    await decibels.click();
    expect(await decibels.getAttribute('aria-pressed')).toBe('true');
    await expect.poll(async () => (await picture()).equals(linear)).toBe(false);
    await decibels.click();
    await expect.poll(async () => (await picture()).equals(linear)).toBe(true);
    await press('Mark: inner race');
    await expect.poll(async () => (await picture()).equals(linear)).toBe(false);
    await page.close();
  });

  it('draws a cascade where the speed changes, and none where it does not', async () => {
    const { path } = await report({ file: join(demoData, 'coast-down.flac'), config: demoStation });
    const page = await open(path);
    const { over, readout } = await chart(page, 'cascade');
    const box = (await over.boundingBox())!;
    await page.mouse.move(box.x + box.width / 4, box.y + box.height - 60);
    expect(await textOf(readout)).toMatch(/^[\d.]+ Hz · [\d.]+ s · [\d.e-]+ mm\/s$/);
    expect(complaints).toEqual([]);
    await page.close();
    const steady = await report({ file: join(demoData, 'healthy.flac'), config: demoStation });
    expect(steady.text).not.toContain('data-chart="cascade"');
  });

  it('prints with every chart drawn', async () => {
    const { path } = await report({ file: join(demoData, 'outer.flac'), config: demoStation });
    const page = await open(path);
    const pdf = await page.pdf({ format: 'A4' });
    expect(pdf.subarray(0, 5).toString()).toBe('%PDF-');
    expect(await page.locator('figure.chart:not([data-filled])').count()).toBe(0);
    expect(complaints).toEqual([]);
    await page.close();
  });

  it('runs nothing that a tag of the recording brings along', async () => {
    const hostile = '</script><script>window.hostile=1</script><img src=x onerror="window.hostile=1">';
    const made = tags({ cause: hostile, id: hostile, nodeSerial: hostile, version: hostile });
    const file = await snapshot('hostile.flac', [tone(25, 0.5, 5)], made);
    const { path } = await report({ file, config: null });
    const page = await open(path);
    await chart(page, 'waveform');
    expect(await page.evaluate('window.hostile')).toBeUndefined();
    expect(await page.getByText('window.hostile=1').count()).toBeGreaterThan(2);
    expect(requests).toEqual([`file://${path}`]);
    expect(complaints).toEqual([]);
    await page.close();
  });
});
