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
  'python3-scipy': () =>
    spawnSync('/usr/bin/python3', ['-c', 'import scipy'], { stdio: 'ignore' }).status === 0,
};

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

const folder = mkdtempSync(join(tmpdir(), 'forebay-test-'));
const result = join(folder, 'result.json');
const args = ['vitest', 'run', '--reporter=default', '--reporter=json', `--outputFile.json=${result}`];
const tests = run('npx', ['--no-install', ...args, ...process.argv.slice(2)]);
let counts = null;
try {
  counts = JSON.parse(readFileSync(result, 'utf8'));
} catch {
  console.error('The test runner wrote no result.');
}
rmSync(folder, { recursive: true, force: true });
if (counts === null) process.exit(1);
// A file that fails to load counts no test: it must not pass for a clean run.
const broken = counts.testResults.filter(
  (file) => file.status === 'failed' && file.assertionResults.length === 0,
);
const failed = counts.numFailedTests + broken.length;
if (counts.numPendingTests > 0)
  console.log(`${counts.numPendingTests} not run, for want of a tool named above.`);
console.log(`${counts.numPassedTests} passed, ${failed} failed`);
process.exit(failed > 0 || counts.numPassedTests === 0 ? 1 : (tests.status ?? 1));
