// The test command: installs what the tests need, builds, runs them, and closes with the count.
// As root on a Debian-like machine it installs the packages below; elsewhere it names what goes untested.
import { spawnSync } from 'node:child_process';
import { existsSync, mkdtempSync, readFileSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { installDependencies } from './install.mjs';

const root = fileURLToPath(new URL('..', import.meta.url));
const run = (command, args, options = {}) =>
  spawnSync(command, args, { cwd: root, stdio: 'inherit', ...options });

/** Debian package -> what shows that it is there. */
const packages = {
  socat: () => onPath('socat'),
  mosquitto: () => onPath('mosquitto'),
  'mosquitto-clients': () => onPath('mosquitto_sub'),
  openssl: () => onPath('openssl'),
  perl: () => onPath('perl'),
  systemd: () => onPath('systemd-notify'),
  libfaketime: () => faketimeThere(),
  flac: () => onPath('flac'),
  chromium: () => onPath('chromium'),
  gfortran: () => onPath('gfortran'),
  'python3-soundfile': () => python('soundfile'),
  'python3-scipy': () => python('scipy'),
};

function python(module) {
  return spawnSync('/usr/bin/python3', ['-c', `import ${module}`], { stdio: 'ignore' }).status === 0;
}

function faketimeThere() {
  const folders = ['x86_64', 'aarch64', 'arm'].map(
    (name) => `/usr/lib/${name}-linux-gnu${name === 'arm' ? 'eabihf' : ''}`,
  );
  return folders.some((folder) => existsSync(`${folder}/faketime/libfaketime.so.1`));
}

function onPath(tool) {
  const found = spawnSync('sh', ['-c', `command -v ${tool}`], { stdio: 'ignore' }).status === 0;
  return found || existsSync(`/usr/sbin/${tool}`);
}

function installPackages() {
  const missing = () => Object.keys(packages).filter((name) => !packages[name]());
  let lacking = missing();
  if (lacking.length > 0 && process.getuid?.() === 0 && onPath('apt-get')) {
    console.log(`Installing for the tests: ${lacking.join(', ')}`);
    const env = { ...process.env, DEBIAN_FRONTEND: 'noninteractive' };
    run('apt-get', ['update', '-q'], { stdio: 'ignore', env });
    run('apt-get', ['install', '-y', '-q', '--no-install-recommends', ...lacking], {
      stdio: ['ignore', 'ignore', 'inherit'],
      env,
    });
    lacking = missing();
  }
  for (const name of lacking) console.log(`NOT TESTED: what needs ${name} (install it, or run this as root)`);
}

installDependencies();
installPackages();
const build = run(process.execPath, [join(root, 'scripts/build.mjs'), '--clean']);
if (build.status !== 0) process.exit(build.status ?? 1);

/**
 * Runs vitest once and gives what it counted; null: it wrote no result.
 * A file that fails to load counts no test: it must not pass for a clean run, so it counts as a failure.
 */
function vitest(args) {
  const folder = mkdtempSync(join(tmpdir(), 'forebay-test-'));
  const result = join(folder, 'result.json');
  const reporters = ['--reporter=default', '--reporter=json', `--outputFile.json=${result}`];
  const { status } = run('npx', ['--no-install', 'vitest', 'run', ...reporters, ...args]);
  try {
    const { numPassedTests, numFailedTests, numPendingTests, testResults } = JSON.parse(
      readFileSync(result, 'utf8'),
    );
    const broken = testResults.filter(
      (file) => file.status === 'failed' && file.assertionResults.length === 0,
    );
    return {
      status,
      passed: numPassedTests,
      failed: numFailedTests + broken.length,
      pending: numPendingTests,
    };
  } catch {
    console.error('The test runner wrote no result.');
    return null;
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

const chosen = process.argv.slice(2);
// The live stations come after the rest and one at a time: they keep time, and what runs beside them would take it.
// What missed its time is run a second time, which the report shows: on a busy machine simulated nodes lose samples.
const suites =
  chosen.length > 0
    ? [chosen]
    : [
        ['--exclude', 'test/station/**', '--retry=1'],
        ['test/station', '--no-file-parallelism', '--retry=1'],
      ];
const results = suites.map(vitest);
const sum = (key) => results.reduce((total, result) => total + (result?.[key] ?? 0), 0);
if (sum('pending') > 0) console.log(`${sum('pending')} not run, for want of a tool named above.`);
const lost = results.filter((result) => result === null).length;
console.log(`${sum('passed')} passed, ${sum('failed') + lost} failed`);
const clean = results.every((result) => result !== null && result.status === 0 && result.failed === 0);
process.exit(clean && sum('passed') > 0 ? 0 : 1);
