/** Exports, read back by programs that are not ours: gfortran with the published formats, libsndfile, a CSV parser. */
import { execFileSync, spawnSync } from 'node:child_process';
import { existsSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { exportCommand } from '../../src/cli/export.ts';
import { writeSnapshot } from '../../src/snapshot/flac-write.ts';
import { openRecording } from '../../src/snapshot/recording.ts';
import { uniform } from '../support/pump-signal.ts';
import { someTags } from '../support/tagged.ts';
import { hasPython, hasTool } from '../support/tools.ts';
import { wavBytes } from '../support/wav.ts';

const folder = mkdtempSync(join(tmpdir(), 'forebay-export-'));
const snapshot = join(folder, 'snapshot.flac');
const frames = 10_001;
let counts: Int32Array[] = [];
let said = '';
const err = {
  write: (text: string) => {
    said += text;
  },
};

beforeAll(async () => {
  const random = uniform(5);
  counts = someTags.channels.map(({ unit }) =>
    Int32Array.from({ length: frames }, (_, i) =>
      unit === 'logic' ? Number(i % 400 < 20) : Math.floor((2 * random() - 1) * 8_388_608),
    ),
  );
  counts[0]!.set([-8_388_608, 8_388_607, 0, -1, 1]);
  for (const channel of counts) channel.fill(0, 100, 107);
  await writeSnapshot({ path: snapshot, counts, tags: someTags });
});
afterAll(() => rmSync(folder, { recursive: true, force: true }));

async function exported(to: 'wav' | 'csv' | 'uff'): Promise<string> {
  const file = join(folder, `out.${to}`);
  expect(await exportCommand({ from: snapshot, to, file, force: true, err })).toBe(0);
  return file;
}

describe('export', () => {
  it('as WAV keeps each count, and says beside it what WAV cannot', async () => {
    const file = await exported('wav');
    const wav = openRecording(file);
    expect(wav).toMatchObject({ channels: 3, frames, bitsPerSample: 24, rateHz: 40_958 });
    expect(wav.read(0, frames).map((channel) => Array.from(channel))).toEqual(
      counts.map((channel) => Array.from(channel)),
    );
    wav.close();
    const beside = JSON.parse(readFileSync(`${file}.json`, 'utf8')) as Record<string, unknown>;
    expect(beside).toMatchObject({
      snapshot: someTags.id,
      start: someTags.start,
      start_clock: 'free',
      rate: { hz: 40_958.2173, claimed_hz: 40_960 },
      missing: [{ at_sample: 100, samples: 7 }],
    });
    expect((beside.channels as unknown[])[1]).toEqual({
      name: 'v',
      points: ['pump-1/motor-de-v', 'pump-1/foot'],
      unit: 'm/s2',
      units_per_count: 2 ** -12,
      full_scale: 2048,
    });
    expect(said).toContain('7 samples never came');
  });

  it('as WAV with the plain head where that is enough', async () => {
    const from = join(folder, 'mono.flac');
    const [channel] = someTags.channels;
    const mono = Int32Array.of(-32_768, 32_767, 0, 5, -1);
    await writeSnapshot({
      path: from,
      counts: [mono],
      tags: { ...someTags, gaps: [], channels: [channel!] },
    });
    const file = join(folder, 'mono.wav');
    expect(await exportCommand({ from, to: 'wav', file, force: false, err })).toBe(0);
    // wavBytes of the tests is written from the layout of a PCM WAV file alone.
    expect(readFileSync(file)).toEqual(wavBytes([mono], 40_958, 16));
  });

  it('as CSV names the units, and its values divide to the counts; what never came is empty', async () => {
    const [heading, ...lines] = readFileSync(await exported('csv'), 'utf8')
      .trimEnd()
      .split('\n');
    expect(heading).toBe('time [s],pump-1/motor-de-h [g],pump-1/motor-de-v [m/s2],tach [logic]');
    expect(lines).toHaveLength(frames);
    expect(lines[100]).toBe(`${(100 / 40_958.2173).toFixed(9)},,,`);
    let wrong = 0;
    lines.forEach((line, i) => {
      if (i >= 100 && i < 107) return;
      const [time, ...values] = line.split(',').map(Number);
      if (Math.abs(time! - i / 40_958.2173) > 1e-9) wrong++;
      values.forEach((value, c) => {
        if (value / someTags.channels[c]!.unitsPerCount !== counts[c]![i]) wrong++;
      });
    });
    expect(wrong).toBe(0);
  });

  it('as a universal file has the lines of dataset 58', async () => {
    const lines = readFileSync(await exported('uff'), 'latin1').split('\n');
    // Lines and columns: check values seen in the published description of dataset 58.
    expect(lines.slice(0, 2)).toEqual(['    -1', '    58']);
    expect(lines[4]).toBe('02-MAR-26 10:15:20');
    expect(lines[6]).toBe('MISSING, WRITTEN AS 0: 100+7');
    expect(lines.filter((line) => line === '    -1')).toHaveLength(6);
    expect(Math.max(...lines.map((line) => line.length))).toBeLessThanOrEqual(80);
    expect(lines[9]?.slice(0, 10)).toBe('        17');
    expect(lines[10]?.slice(0, 10)).toBe('        12');
    expect(lines[10]?.slice(47, 48)).toBe('g');
  });

  it('refuses to replace a file, and a recording that says nothing of its counts', async () => {
    const file = join(folder, 'kept.csv');
    writeFileSync(file, 'mine');
    const options = { from: snapshot, to: 'csv', file, force: false, err } as const;
    await expect(exportCommand(options)).rejects.toMatchObject({ code: 'file.exists' });
    expect(readFileSync(file, 'utf8')).toBe('mine');
    const bare = join(folder, 'bare.wav');
    writeFileSync(bare, wavBytes([Int32Array.of(1, 2, 3)], 1000, 16));
    const untagged = { ...options, from: bare, file: join(folder, 'none.csv') };
    await expect(exportCommand(untagged)).rejects.toMatchObject({ code: 'recording.untagged' });
    const nowhere = { ...options, file: join(folder, 'no/such/folder.csv') };
    await expect(exportCommand(nowhere)).rejects.toMatchObject({ code: 'file.unwritable' });
    expect(existsSync(untagged.file)).toBe(false);
  });
});

/** Reads every dataset 58 of a file with the FORMAT strings of the published description, and prints what it read. */
const fortran = `program read58
  implicit none
  integer :: unit, ios, marker, kind, i, n, ftype, fnum, ver, lcase, rnode, rdir, fnode, fdir
  integer :: otype, spacing, atype, aexp(3)
  real :: start, step, z
  double precision, allocatable :: values(:)
  character(len=1) :: id(80, 5), rname(10), fname(10), label(20), units(20)
  character(len=256) :: path
  call get_command_argument(1, path)
  open (newunit=unit, file=trim(path), status='old', form='formatted')
  do
    read (unit, '(I6)', iostat=ios) marker
    if (ios /= 0) exit
    if (marker /= -1) stop 2
    read (unit, '(I6)') kind
    if (kind /= 58) stop 3
    do i = 1, 5
      read (unit, '(80A1)') id(:, i)
    end do
    read (unit, '(2(I5,I10),2(1X,10A1,I10,I4))') ftype, fnum, ver, lcase, rname, rnode, rdir, fname, fnode, fdir
    read (unit, '(3I10,3E13.5)') otype, n, spacing, start, step, z
    write (*, '(6(A,I0),A,ES13.6)') 'type ', ftype, ' number ', fnum, ' node ', rnode, ' ordinate ', otype, &
      ' points ', n, ' spacing ', spacing, ' step ', step
    do i = 1, 4
      read (unit, '(I10,3I5,2(1X,20A1))') atype, aexp, label, units
      write (*, '(A,I0,42A)') 'axis ', atype, ' ', label, '|', units
    end do
    allocate (values(n))
    read (unit, '(4E20.12)') values
    read (unit, '(I6)') marker
    if (marker /= -1) stop 4
    do i = 1, n
      write (*, '(ES25.16E3)') values(i)
    end do
    deallocate (values)
  end do
end program`;

describe.runIf(hasTool('gfortran'))('the universal file and gfortran', () => {
  it('is read by the published FORMAT strings, each value to its count', async () => {
    const source = join(folder, 'read58.f90');
    const binary = join(folder, 'read58');
    writeFileSync(source, fortran);
    execFileSync('gfortran', ['-o', binary, source]);
    const said58 = execFileSync(binary, [await exported('uff')], { encoding: 'utf8', maxBuffer: 1e8 });
    const lines = said58.trimEnd().split('\n');
    expect(lines).toHaveLength(3 * (5 + frames));
    let wrong = 0;
    someTags.channels.forEach(({ unitsPerCount, unit }, c) => {
      const from = c * (5 + frames);
      expect(lines[from]).toBe(
        `type 1 number ${c + 1} node ${c + 1} ordinate 4 points ${frames} spacing 1 step  2.441510E-05`,
      );
      expect(lines[from + 1]?.trim()).toMatch(/^axis 17 Time +\|s$/);
      expect(lines[from + 2]?.trim()).toMatch(
        unit === 'logic' ? /^axis 0 Logic +\|NONE$/ : new RegExp(`^axis 12 Acceleration +\\|${unit}$`),
      );
      for (let i = 0; i < frames; i++) {
        const value = Number(lines[from + 5 + i]);
        // Twelve decimals are far finer than half a count of 24 bits.
        if (Math.abs(value / unitsPerCount - counts[c]![i]!) > 1e-4) wrong++;
      }
    });
    expect(wrong).toBe(0);
  });
});

describe.runIf(hasPython('soundfile'))('the WAV file and libsndfile', () => {
  it('is read to the count', async () => {
    const program =
      'import sys, soundfile\n' +
      'data, rate = soundfile.read(sys.argv[1], dtype="int32", always_2d=True)\n' +
      'sys.stdout.buffer.write(data.astype("<i4").tobytes())\n';
    const { stdout } = spawnSync('/usr/bin/python3', ['-c', program, await exported('wav')], {
      maxBuffer: 1e8,
    });
    expect(stdout.length).toBe(4 * 3 * frames);
    const read = counts.map((channel, c) => channel.map((_, i) => stdout.readInt32LE(4 * (i * 3 + c)) >> 8));
    expect(read.map((channel) => Array.from(channel))).toEqual(counts.map((channel) => Array.from(channel)));
  });
});
