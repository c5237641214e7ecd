/**
 * The faults that a station at the end of a bad road meets. Each brings its cause about while alarms and samples flow,
 * and ends it; what is measured afterwards is the same for all. The tests run this list, and so does the script that
 * prints the table of the README.
 */
import { spawnSync } from 'node:child_process';
import {
  closeSync,
  existsSync,
  mkdirSync,
  openSync,
  rmdirSync,
  rmSync,
  truncateSync,
  writeFileSync,
  writeSync,
} from 'node:fs';
import { join } from 'node:path';
import { until } from './broker-rig.ts';
import { type FaultStation, pointKeys, stationText } from './fault-station.ts';
import { sleep } from './proxy.ts';
import { pacedNode } from './replug.ts';
import { NodeFrames } from './sender.ts';
import { faketimeLibrary } from './tools.ts';

type Start = NonNullable<Parameters<typeof FaultStation.start>[0]>;

export interface Fault {
  readonly name: string;
  /** What it befalls. */
  readonly room: 'agent' | 'broker' | 'node';
  /** How often in the short form; 0: only when a person has the time. */
  readonly times: number;
  /** A station of its own; left out, the usual one that other faults are tried on too. */
  readonly start?: () => Start;
  /** Brings the cause about and ends it. Throws where something is not as it must be meanwhile. */
  inject(station: FaultStation, random: () => number): Promise<void>;
  /** Records that may come to no good reading for each time, at each point. */
  readonly costs: number;
  /** null: it can be tried here. */
  readonly untested?: () => string | null;
}

const faketime = faketimeLibrary();

const asRoot = process.getuid?.() === 0;
const mayMount = () => {
  if (!asRoot) return 'it needs the right to mount';
  const folder = '/tmp/forebay-may-mount';
  mkdirSync(folder, { recursive: true });
  const mounted = spawnSync('mount', ['-t', 'tmpfs', '-o', 'size=1m', 'tmpfs', folder]).status === 0;
  if (mounted) spawnSync('umount', [folder]);
  return mounted ? null : 'it needs the right to mount';
};

/** The station's folder on a small disk of its own; unmounted with `release`. */
function smallDisk(): Start {
  return {
    prepare: (station) => {
      mkdirSync(station.directory, { recursive: true });
      const { status } = spawnSync('mount', ['-t', 'tmpfs', '-o', 'size=12m', 'tmpfs', station.directory]);
      if (status !== 0) throw new Error('no tmpfs');
      station.onStop(() => void spawnSync('umount', ['-l', station.directory]));
    },
  };
}

/** The station's folder on a card of its own, with a file system that turns read-only by itself when it fails. */
function cardOf(station: FaultStation) {
  const image = join(station.agent.folder, 'card.img');
  const run = (command: string, ...args: string[]) => {
    const { status, stderr } = spawnSync(command, args, { encoding: 'utf8' });
    if (status !== 0) throw new Error(`${command} ${args.join(' ')}: ${stderr}`);
  };
  return {
    make: () => {
      mkdirSync(station.directory, { recursive: true });
      writeFileSync(image, '');
      truncateSync(image, 32 << 20);
      run('mkfs.ext4', '-q', '-F', image);
    },
    insert: () => run('mount', '-o', 'loop,errors=remount-ro', image, station.directory),
    /** What the kernel does when the card's journal cannot be written: files that are open turn read-only as well. */
    fail: () => run('mount', '-o', 'remount,abort', station.directory),
    remove: () => run('umount', station.directory),
  };
}

function ownCard(): Start {
  return {
    prepare: (station) => {
      const card = cardOf(station);
      card.make();
      card.insert();
      station.onStop(() => void spawnSync('umount', ['-l', station.directory]));
    },
  };
}

/** A control group whose memory is limited; the kernel kills what wants more (memory.oom_control, memory.max). */
function memoryGroup(limitBytes: number): { add(pid: number): void; remove(): void } | null {
  const [root, limit] = existsSync('/sys/fs/cgroup/cgroup.controllers')
    ? ['/sys/fs/cgroup', 'memory.max']
    : ['/sys/fs/cgroup/memory', 'memory.limit_in_bytes'];
  const folder = join(root, `forebay-test-${process.pid}`);
  try {
    mkdirSync(folder, { recursive: true });
    writeFileSync(join(folder, limit), String(limitBytes));
  } catch {
    rmSync(folder, { recursive: true, force: true });
    return null;
  }
  return {
    add: (pid) => writeFileSync(join(folder, 'cgroup.procs'), String(pid)),
    remove: () => rmdirSync(folder),
  };
}

/** Pauses between two connections grow with each that did not last, so these faults do not share a station. */
const fresh = (): Start => ({});

function oversize(protocol: '5' | '3.1.1'): Start {
  const broker =
    `{url: "mqtt://127.0.0.1:PORT", client_id: test-weir-gateway, protocol: ${protocol}, keepalive_s: 10, ` +
    'bytes_per_day: 1000000000}';
  return {
    brokerLines: ['allow_anonymous true', 'max_packet_size 2600', 'max_queued_messages 0'],
    station: { broker },
  };
}

const stands = (station: FaultStation, name: string, withinMs = 15_000) =>
  until(
    () => station.journalState(`agent/${name}`) === 'unacknowledged',
    `the alarm ${name} in the journal`,
    withinMs,
  );

const said = (station: FaultStation, text: string) => station.agent.text.includes(text);

export const faults: readonly Fault[] = [
  {
    name: 'agent killed (SIGKILL) at a random moment',
    room: 'agent',
    times: 10,
    costs: 8,
    inject: async ({ agent }, random) => {
      await sleep(random() * 1500);
      await agent.stop('SIGKILL');
      await agent.start();
    },
  },
  {
    name: 'agent stopped and started',
    room: 'agent',
    times: 1,
    costs: 8,
    inject: async ({ agent, room }) => {
      const began = performance.now();
      if ((await agent.stop()) !== 0) throw new Error('the agent did not end well');
      const took = performance.now() - began;
      if (took > 5000) throw new Error(`the stop took ${took} ms`);
      await until(() => room.latest.get('agent')?.state === 'offline', 'the word offline');
      await agent.start();
    },
  },
  {
    name: 'agent stopped while the broker is paused',
    room: 'agent',
    times: 1,
    costs: 12,
    inject: async ({ agent, broker }) => {
      broker.pause();
      await sleep(500);
      const began = performance.now();
      await agent.stop();
      const took = performance.now() - began;
      broker.resume();
      if (took > 5000) throw new Error(`the stop took ${took} ms`);
      await agent.start();
    },
  },
  {
    name: 'broker killed',
    room: 'broker',
    times: 2,
    costs: 0,
    start: fresh,
    inject: async ({ broker, link, room }, random) => {
      await sleep(random() * 500);
      // The window that belongs to the broker: what it acknowledged and had not handed on. It is kept shut here.
      link.refuse(true);
      link.cut();
      await sleep(300);
      await broker.kill();
      await sleep(1000);
      await broker.restart();
      await until(() => room.client.connected, 'the control room to be back');
      await sleep(200);
      link.refuse(false);
    },
  },
  {
    name: 'broker paused (SIGSTOP)',
    room: 'broker',
    times: 2,
    costs: 0,
    start: fresh,
    inject: async ({ broker }) => {
      broker.pause();
      await sleep(2500);
      broker.resume();
    },
  },
  {
    name: 'broker refuses connections',
    room: 'broker',
    times: 1,
    costs: 0,
    start: fresh,
    inject: async ({ link }) => {
      link.refuse(true);
      link.cut();
      await sleep(4000);
      link.refuse(false);
    },
  },
  {
    name: 'broker denies the alarm topics (access rules)',
    room: 'broker',
    times: 1,
    costs: 0,
    start: () => ({
      brokerLines: ['allow_anonymous true', 'acl_file FOLDER/acl'],
      brokerFiles: { acl: 'topic readwrite forebay/#\n' },
    }),
    inject: async ({ broker, agent, link }) => {
      const rules = (text: string) => {
        writeFileSync(join(broker.folder, 'acl'), text);
        broker.signal('SIGHUP');
      };
      rules('topic deny forebay/test-weir/m1/alarm/#\ntopic readwrite forebay/#\n');
      await until(() => agent.text.includes('refused by the broker'), 'a refusal');
      await sleep(1000);
      rules('topic readwrite forebay/#\n');
      await sleep(500);
      link.cut();
    },
  },
  {
    name: 'broker takes no message of this size (MQTT 5 says so)',
    room: 'broker',
    times: 1,
    costs: 0,
    start: () => oversize('5'),
    inject: async (station) => {
      station.askFor('readings');
      await until(() => said(station, 'is set aside'), 'the message to be set aside');
    },
  },
  {
    name: 'broker hangs up over a message of this size (MQTT 3.1.1 says nothing)',
    room: 'broker',
    // Tried eight times with growing pauses before it is set aside: minutes.
    times: 0,
    costs: 0,
    start: () => oversize('3.1.1'),
    inject: async (station) => {
      station.askFor('readings');
      await until(() => said(station, 'is set aside'), 'the message to be set aside', 300_000);
    },
  },
  {
    name: 'link cut',
    room: 'broker',
    times: 3,
    costs: 0,
    start: fresh,
    inject: async ({ link }, random) => {
      await sleep(random() * 400);
      link.cut();
    },
  },
  {
    name: 'link stalled for seconds',
    room: 'broker',
    times: 2,
    costs: 0,
    start: fresh,
    inject: async ({ link }) => {
      link.stall();
      await sleep(3000);
      link.flow();
    },
  },
  {
    name: 'link of 5 kB/s',
    room: 'broker',
    times: 1,
    costs: 0,
    start: fresh,
    inject: async ({ link }) => {
      link.bytesPerS = 5000;
      await sleep(6000);
      link.bytesPerS = null;
    },
  },
  {
    name: 'link with 300 ms each way',
    room: 'broker',
    times: 1,
    costs: 0,
    start: fresh,
    inject: async ({ link }) => {
      link.delayMs = 300;
      await sleep(5000);
      link.delayMs = 0;
    },
  },
  {
    name: 'serial device unplugged while streaming',
    room: 'node',
    times: 3,
    costs: 14,
    inject: async (station, random) => {
      const [cable] = station.cables;
      await sleep(random() * 300);
      cable.unplug();
      await sleep(800);
      await cable.plug();
    },
  },
  {
    name: 'node silent',
    room: 'node',
    times: 1,
    costs: 18,
    inject: async (station) => {
      const [cable] = station.cables;
      cable.muted = true;
      // The link sees it after 3 s, the alarm has 5 s of patience.
      await stands(station, 'node-1.silent');
      cable.muted = false;
    },
  },
  {
    name: 'serial data that come in bursts',
    room: 'node',
    times: 1,
    costs: 0,
    inject: async ({ cables: [cable] }) => {
      cable.holdMs = 600;
      await sleep(4000);
      cable.holdMs = 0;
    },
  },
  {
    name: 'node restarts (index from 0)',
    room: 'node',
    times: 2,
    costs: 3,
    inject: async ({ nodes: [node] }) => {
      node.restart();
      await sleep(100);
    },
  },
  {
    name: 'node clock 5 % fast',
    room: 'node',
    times: 1,
    costs: 5,
    inject: async ({ nodes, cables: [cable] }) => {
      const [node] = nodes;
      node.stop();
      const fast = pacedNode(1, 'A1', cable, { trueRateHz: 4096 * 1.05 });
      fast.frames.counter = node.frames.counter;
      fast.nextIndex = node.nextIndex;
      fast.start();
      await sleep(4000);
      fast.stop();
      node.frames.counter = fast.frames.counter;
      node.nextIndex = fast.nextIndex;
      node.start();
    },
  },
  {
    name: 'two nodes swapped',
    room: 'node',
    times: 1,
    costs: 30,
    inject: async (station) => {
      const [one, two] = station.cables;
      const swapped = one.swapWith(two);
      await stands(station, 'node-1.foreign-node');
      await stands(station, 'node-2.foreign-node');
      const [goodMs, blankMs] = [station.room.goodMs, station.room.blankMs];
      await until(
        () => pointKeys.every((point) => (blankMs.get(point) ?? 0) > (goodMs.get(point) ?? 0)),
        'readings without figures',
      );
      swapped();
    },
  },
  {
    name: 'node that needs more memory than a link is given',
    room: 'node',
    times: 1,
    costs: 0,
    inject: async (station) => {
      const cable = station.moreCable('tty-3');
      await cable.plug();
      const channels = Array.from({ length: 8 }, (_, c) => ({ name: `c${c}`, unit: 'g' as const, scale: 1 }));
      const spec = {
        node: 3,
        rateHz: 4e6,
        format: 'i24' as const,
        channels,
        serialNumber: 'X',
        firmware: '1',
      };
      const frames = new NodeFrames(spec);
      const timer = setInterval(() => {
        cable.write(frames.describe());
        cable.write(frames.samples(0, new Int32Array(8)));
      }, 100);
      const moreLinks = '  - {id: node-3, serial: {path: FOLDER/tty-3, baud: 3000000}}\n';
      station.reload(stationText(station.link.port, { moreLinks }));
      await until(() => said(station, 'MB are allowed'), 'the ring to be refused');
      clearInterval(timer);
      cable.unplug();
      const taken = station.count('configuration taken');
      station.reload(stationText(station.link.port));
      await until(() => station.count('configuration taken') > taken, 'the link to be gone');
    },
  },
  {
    name: 'disk full',
    room: 'agent',
    times: 1,
    costs: 60,
    start: smallDisk,
    untested: mayMount,
    inject: async (station) => {
      const ballast = join(station.directory, 'ballast');
      spawnSync('dd', ['if=/dev/zero', `of=${ballast}`, 'bs=4096']);
      await until(() => said(station, 'store.full'), 'a full disk');
      await sleep(3000);
      truncateSync(ballast, 0);
    },
  },
  {
    name: 'disk read-only at the start',
    room: 'agent',
    times: 1,
    costs: 15,
    start: smallDisk,
    untested: mayMount,
    inject: async (station) => {
      await station.agent.stop('SIGKILL');
      const remount = (how: 'ro' | 'rw') =>
        spawnSync('mount', ['-o', `remount,${how}`, station.directory]).status === 0;
      if (!remount('ro')) throw new Error('the disk did not become read-only');
      const refused = await station.agent.start().then(
        () => '',
        (error: Error) => error.message,
      );
      if (!refused.includes('store.unwritable')) throw new Error(`started all the same: ${refused}`);
      if (!remount('rw')) throw new Error('the disk stayed read-only');
      await station.agent.start();
    },
  },
  {
    name: 'disk turns read-only while running',
    room: 'agent',
    times: 1,
    costs: 40,
    start: ownCard,
    untested: mayMount,
    inject: async (station) => {
      const card = cardOf(station);
      card.fail();
      await until(() => said(station, 'store.unwritable'), 'a word on the disk', 20_000);
      await until(() => station.room.latest.get('agent')?.storage === 'failing', 'a word to SCADA', 20_000);
      await station.agent.stop();
      card.remove();
      card.insert();
      await station.agent.start();
    },
  },
  {
    name: 'memory ceiling hit (killed by the kernel)',
    room: 'agent',
    times: 1,
    costs: 12,
    untested: () => {
      const group = memoryGroup(1 << 30);
      group?.remove();
      return group === null ? 'it needs the right to make a control group' : null;
    },
    inject: async ({ agent }) => {
      const group = memoryGroup(4 << 20)!;
      group.add(agent.pid);
      await until(() => !agent.running, 'the agent to be killed', 60_000);
      group.remove();
      await agent.start();
    },
  },
  ...(['truncated', 'garbage', 'empty'] as const).map(
    (how): Fault => ({
      name: `database found ${how} at the start`,
      room: 'agent',
      times: 1,
      costs: 10,
      inject: async (station) => {
        await station.alarms();
        await station.agent.stop('SIGKILL');
        station.keepLedger();
        const file = join(station.directory, 'forebay.db');
        if (how === 'truncated') truncateSync(file, 20_000);
        else writeFileSync(file, how === 'empty' ? '' : Buffer.alloc(30_000, 'no database '));
        await station.agent.start();
        station.addLedger();
        await stands(station, 'gateway.database');
      },
    }),
  ),
  {
    name: 'database destroyed while running',
    room: 'agent',
    times: 1,
    costs: 25,
    start: fresh,
    inject: async (station) => {
      await station.alarms();
      station.keepLedger();
      for (const suffix of ['', '-wal']) {
        const file = openSync(join(station.directory, `forebay.db${suffix}`), 'r+');
        writeSync(file, Buffer.alloc(2_000_000, 'no database '));
        closeSync(file);
      }
      // The agent ends by itself; whoever started it, here as systemd would, starts it anew.
      await until(() => !station.agent.running, 'the agent to end', 30_000);
      await station.agent.start();
      station.addLedger();
      await stands(station, 'gateway.database');
    },
  },
  {
    name: 'wall clock jumps by 10 years, there and back',
    room: 'agent',
    times: 1,
    costs: 0,
    untested: () => (faketime === undefined ? 'it needs libfaketime' : null),
    start: () => ({
      prepare: (station) => {
        station.setClock('+0');
        station.agent.env = {
          ...process.env,
          LD_PRELOAD: faketime,
          FAKETIME_TIMESTAMP_FILE: station.clockFile,
          FAKETIME_NO_CACHE: '1',
          FAKETIME_DONT_FAKE_MONOTONIC: '1',
        };
      },
    }),
    inject: async (station) => {
      for (const jump of ['+3652d', '-3652d', '+0']) {
        station.setClock(jump);
        await sleep(2500);
      }
    },
  },
  {
    name: 'measuring worker dies',
    room: 'agent',
    times: 3,
    costs: 3,
    start: () => ({ prepare: killable }),
    inject: async (station, random) => {
      await sleep(random() * 1000);
      station.agent.signal('SIGUSR2');
      await stands(station, 'gateway.measuring');
    },
  },
  {
    name: 'database worker dies',
    room: 'agent',
    times: 3,
    costs: 2,
    start: () => ({ prepare: killable }),
    inject: async (station, random) => {
      await sleep(random() * 1000);
      station.agent.signal('SIGWINCH');
      await until(() => said(station, 'the store worker ended'), 'the worker to end');
    },
  },
  {
    name: 'configuration replaced by a bad one',
    room: 'node',
    times: 1,
    costs: 0,
    inject: async (station) => {
      station.reload('site: {id: Test weir}\nlinks: []\n');
      await stands(station, 'gateway.configuration');
      if (!said(station, 'the old one stays')) throw new Error('not a word in the log');
      station.reload(stationText(station.link.port));
      await until(() => said(station, 'configuration taken'), 'the good one to be taken');
    },
  },
  {
    name: 'configuration replaced by a good one',
    room: 'node',
    times: 2,
    costs: 0,
    inject: async (station, random) => {
      const before = station.count('configuration taken');
      const more = '  - {id: node-3, tcp: {host: 127.0.0.1, port: 9}}\n';
      station.reload(stationText(station.link.port, { alertMmS: 3 + random(), moreLinks: more }));
      await until(() => station.count('configuration taken') > before, 'it to be taken');
      await sleep(1500);
      station.reload(stationText(station.link.port));
      await until(() => station.count('configuration taken') > before + 1, 'the old one to be taken again');
    },
  },
  {
    name: 'configuration that changes the broker connection',
    room: 'node',
    times: 1,
    costs: 0,
    inject: async (station) => {
      const taken = station.count('configuration taken');
      const text = stationText(station.link.port);
      station.reload(text.replace('keepalive_s: 10', 'keepalive_s: 20'));
      await until(() => station.count('configuration taken') > taken, 'it to be taken');
      await station.flows();
      station.reload(text);
      await until(() => station.count('configuration taken') > taken + 1, 'the old one to be taken again');
    },
  },
  {
    name: 'configuration that changes one link of two',
    room: 'node',
    times: 1,
    // The link that changes is closed and opened anew, twice; the other one is looked at below.
    costs: 10,
    inject: async (station) => {
      const others = ['m3/p', 'm4/p'];
      const lost = station.readingsLost(others);
      const taken = station.count('configuration taken');
      const text = stationText(station.link.port);
      station.reload(text.replace('tty-1, baud: 3000000', 'tty-1, baud: 921600'));
      await until(() => station.count('configuration taken') > taken, 'it to be taken');
      await station.flows();
      station.reload(text);
      await until(() => station.count('configuration taken') > taken + 1, 'the old one to be taken again');
      await station.flows();
      if (station.readingsLost(others) > lost) throw new Error('the link that did not change lost records');
    },
  },
];

function killable({ agent }: FaultStation): void {
  agent.nodeArgs = ['--import', new URL('./worker-killer.mjs', import.meta.url).href];
}
