/** `forebay demo`: simulated pumps on serial lines, the agent, its embedded broker and a client, in one terminal. */

import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { connect, type MqttClient } from 'mqtt';
import { ForebayError } from '../config/errors.ts';
import { SimulatedNode } from '../simulate/node.ts';
import { bufferedSink } from '../simulate/sinks.ts';
import { DemoAgent } from './demo-agent.ts';
import { DemoBoard } from './demo-board.ts';
import { type DemoEvidence, pullEvidence } from './demo-evidence.ts';
import { type DemoLines, freePort, openLines } from './demo-lines.ts';
import { demoEveryS, demoNodes, demoSite, demoStationText } from './demo-station.ts';
import { DemoView, summaryLines, type Traffic } from './demo-view.ts';

export interface DemoOptions {
  /** null: what shows all of it and still ends within a minute and a half. */
  readonly seconds: number | null;
  readonly out: Pick<NodeJS.WritableStream, 'write'> & { isTTY?: boolean; columns?: number };
  /** Of Forebay. */
  readonly version: string;
}

const usualSeconds = 65;
/** The first reading needs 8 s of samples, and three must agree before the bearing alarm. */
const leastSeconds = 50;
const mostSeconds = 3600;
/** What a node on USB holds while the host is busy: about a second. */
const nodeMemoryBytes = 262_144;
const mostStartMs = 12_000;
const liveRefreshMs = 1000;
const plainRefreshMs = 10_000;

/** @returns the exit status: 0 when what the demo promises was seen, else 1. */
export async function demoCommand({ seconds, out, version }: DemoOptions): Promise<number> {
  const lasts = seconds ?? usualSeconds;
  if (!(lasts >= leastSeconds && lasts <= mostSeconds)) {
    throw new ForebayError(
      'command.usage',
      `demo --seconds ${lasts}: ${leastSeconds} to ${mostSeconds} are possible; the pump needs time to fail`,
    );
  }
  const interruption = listenForInterruption();
  const directory = mkdtempSync(join(tmpdir(), 'forebay-demo-'));
  try {
    const lines = await openLines(demoNodes(lasts).length);
    try {
      return await show(lines, directory, lasts, new DemoView(out), interruption.happened, version);
    } finally {
      for (const line of lines.lines) line.close();
    }
  } finally {
    rmSync(directory, { recursive: true, force: true });
    interruption.done();
  }
}

async function show(
  { lines, said }: DemoLines,
  directory: string,
  lasts: number,
  view: DemoView,
  interrupted: Promise<'interrupted'>,
  version: string,
): Promise<number> {
  const port = await freePort();
  const stationFile = join(directory, 'station.yaml');
  const transports = lines.map(({ transport }) => transport);
  writeFileSync(
    stationFile,
    demoStationText({ brokerPort: port, storageDirectory: join(directory, 'state'), transports }),
  );
  view.tell([
    'Forebay demo: an invented station with two pumps, three sensors each. pump-1 is sound; the outer race of',
    `pump-2's motor bearing begins to fail. It takes ${Math.round(lasts)} s and ends by itself.`,
    `Nodes to agent: ${said}.`,
    `Agent to broker: MQTT on 127.0.0.1:${port}; listen along: mosquitto_sub -p ${port} -v -t 'forebay/#'`,
    `Quicker than the defaults: a reading every ${demoEveryS} s instead of 10, 1600 lines instead of 3200, all of them sent.`,
  ]);

  const nodes = demoNodes(lasts).map(({ settings, source }, k) => {
    const line = lines[k];
    if (line === undefined) throw new RangeError('demo: fewer lines than nodes');
    return new SimulatedNode(settings, source(), bufferedSink(line.sink, nodeMemoryBytes));
  });
  const board = new DemoBoard(demoSite);
  const agent = new DemoAgent(stationFile, join(directory, 'agent.log'));
  let began = performance.now();
  const elapsedS = () => (performance.now() - began) / 1000;
  const traffic = (): Traffic => ({
    seconds: elapsedS(),
    ofSeconds: lasts,
    rawBytes: nodes.reduce((sum, { counts }) => sum + counts.bytes, 0),
  });
  const { client, ready } = listenTo(port, (topic, payload, packetBytes) => {
    const told = board.accept(topic, payload, packetBytes, elapsedS());
    if (told.length === 0) return;
    view.tell(told.map((line) => `${elapsedS().toFixed(0).padStart(3)} s  ${line}`));
    if (view.live) view.show(board, traffic());
  });
  const timers = new Set<NodeJS.Timeout>();
  const wait = <Word extends string>(ms: number, word: Word) =>
    new Promise<Word>((resolve) => timers.add(setTimeout(() => resolve(word), ms)));
  const ended = agent.ended.then(() => 'agent ended' as const);
  const failed = (why: string): number => {
    view.tell(['', why, 'The end of its log:', ...agent.lastWords().map((line) => `  ${line}`)]);
    return 1;
  };
  try {
    // The nodes speak once somebody listens, so that what the line loses is not the agent's start.
    let cause: 'ready' | 'late' | 'over' | 'interrupted' | 'agent ended' = await Promise.race([
      ready,
      wait(mostStartMs, 'late'),
      interrupted,
      ended,
    ]);
    if (cause === 'late')
      return failed(`The broker of the agent did not answer within ${mostStartMs / 1000} s.`);
    if (cause === 'ready') {
      began = performance.now();
      for (const node of nodes) node.start();
      const refreshMs = view.live ? liveRefreshMs : plainRefreshMs;
      timers.add(setInterval(() => view.show(board, traffic()), refreshMs));
      cause = await Promise.race([wait(lasts * 1000, 'over'), interrupted, ended]);
    }
    if (cause === 'agent ended') return failed('The agent ended by itself.');
    if (cause === 'interrupted') {
      view.tell(['', 'Interrupted: nothing was judged.']);
      return 1;
    }
    view.show(board, traffic());
    view.settle();
    const lost = {
      frames: nodes.reduce((sum, { counts }) => sum + counts.droppedFrames, 0),
      samples: nodes.reduce((sum, { counts }) => sum + counts.lostSamples, 0),
    };
    const cost = traffic();
    const evidence = await evidenceOf(board, port, stationFile, version);
    view.tell(summaryLines(board, cost, lost, evidence));
    return board.missing().length === 0 && evidence.trouble === null
      ? 0
      : failed('For whoever looks into it:');
  } finally {
    for (const timer of timers) clearTimeout(timer);
    for (const node of nodes) node.stop();
    client.end(true);
    await agent.stop();
  }
}

/** Pulls the waveform behind the alarm and writes its report, as an engineer far away would. */
async function evidenceOf(
  board: DemoBoard,
  brokerPort: number,
  stationFile: string,
  version: string,
): Promise<DemoEvidence> {
  const snapshot = board.snapshot();
  if (snapshot === null) return { lines: [], trouble: 'no alarm came with a waveform' };
  try {
    const lines = await pullEvidence({ brokerPort, site: demoSite, snapshot, stationFile, version });
    return { lines, trouble: null };
  } catch (error) {
    return { lines: [], trouble: `the waveform of the alarm: ${(error as Error).message}` };
  }
}

/** A client as any other: it sees what the broker gives, and counts whole packets. */
function listenTo(
  port: number,
  onMessage: (topic: string, payload: string, packetBytes: number) => void,
): { client: MqttClient; ready: Promise<'ready'> } {
  const client = connect(`mqtt://127.0.0.1:${port}`, {
    protocolVersion: 4,
    reconnectPeriod: 250,
    connectTimeout: 2000,
  });
  // The broker comes up with the agent; until then each attempt is refused.
  client.on('error', () => {});
  const ready = new Promise<'ready'>((resolve) => {
    client.on('connect', () => client.subscribe(`forebay/${demoSite}/#`, { qos: 1 }, () => resolve('ready')));
  });
  client.on('message', (topic, payload, packet) => {
    const remaining = packet.length ?? payload.length + topic.length + 4;
    const lengthBytes = remaining < 128 ? 1 : remaining < 16_384 ? 2 : 3;
    onMessage(topic, payload.toString('utf8'), 1 + lengthBytes + remaining);
  });
  return { client, ready };
}

/** Ctrl-C and SIGTERM end the demo in order, so that nothing stays behind. */
function listenForInterruption(): { happened: Promise<'interrupted'>; done(): void } {
  let stop = () => {};
  const happened = new Promise<'interrupted'>((resolve) => {
    stop = () => resolve('interrupted');
  });
  process.on('SIGINT', stop);
  process.on('SIGTERM', stop);
  return {
    happened,
    done: () => {
      process.off('SIGINT', stop);
      process.off('SIGTERM', stop);
    },
  };
}
