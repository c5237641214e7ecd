/** Ways into the machine that this program does not have: no HTTP, no shell, no code from text, no unverified TLS. */
import { readdirSync, readFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { describe, expect, it } from 'vitest';

const source = fileURLToPath(new URL('../../src', import.meta.url));

/** What each pattern would be, and the files in which it is wanted all the same. */
const forbidden: readonly { what: string; pattern: RegExp; except: readonly string[] }[] = [
  { what: 'code from text', pattern: /\beval\s*\(|new Function\b|from 'node:vm'/, except: [] },
  { what: 'HTTP', pattern: /from '(node:)?https?2?'|\bfetch\s*\(\s*['"`]http/, except: [] },
  { what: 'a shell', pattern: /(?<![.\w])exec(Sync)?\s*\(|shell:\s*true/, except: [] },
  {
    what: 'TLS that is not verified',
    pattern: /rejectUnauthorized:\s*false|checkServerIdentity:/,
    except: [],
  },
  {
    what: 'other programs',
    pattern: /from '(node:)?child_process'/,
    except: [
      // timedatectl and systemd-notify, each by name, without a shell.
      'station/clock.ts',
      'station/service-manager.ts',
      // The simulator's pseudo-terminals, and the demo's agent.
      'simulate/pty.ts',
      'cli/demo-agent.ts',
    ],
  },
  {
    what: 'a socket that anybody can reach',
    pattern: /\.listen\s*\(/,
    // Both on loopback, as a test below sees to.
    except: ['uplink/embedded-broker.ts', 'cli/demo-lines.ts'],
  },
];

const files = readdirSync(source, { recursive: true, encoding: 'utf8' }).filter((name) =>
  name.endsWith('.ts'),
);

function complaints(name: string, text: string): string[] {
  return forbidden
    .filter(({ pattern, except }) => pattern.test(text) && !except.includes(name))
    .map(({ what }) => `${name}: ${what}`);
}

describe('src/', () => {
  it('has none of these', () => {
    expect(files.length).toBeGreaterThan(50);
    expect(files.flatMap((name) => complaints(name, readFileSync(join(source, name), 'utf8')))).toEqual([]);
  });

  it('has each exception for a reason that still stands', () => {
    for (const { pattern, except } of forbidden) {
      for (const name of except) expect(readFileSync(join(source, name), 'utf8'), name).toMatch(pattern);
    }
  });

  it('listens on loopback only', () => {
    for (const name of ['uplink/embedded-broker.ts', 'cli/demo-lines.ts']) {
      const text = readFileSync(join(source, name), 'utf8').replaceAll(/\bloopback(?=[,)])/g, "'127.0.0.1'");
      const calls = text.match(/\.listen\s*\([^)]*\)/g) ?? [];
      expect(calls.length, name).toBeGreaterThan(0);
      for (const call of calls.filter((text) => !text.includes('#listen'))) {
        expect(call, name).toContain("'127.0.0.1'");
      }
      expect(text).not.toMatch(/loopback = '(?!127\.0\.0\.1')/);
    }
  });

  it('would be caught', () => {
    const samples = [
      "import vm from 'node:vm'",
      "import { createServer } from 'node:http'",
      'exec(command)',
      'connect({ rejectUnauthorized: false })',
      "import { spawn } from 'node:child_process'",
      'server.listen(8080)',
    ];
    for (const text of samples) expect(complaints('station/new.ts', text), text).toHaveLength(1);
  });
});
