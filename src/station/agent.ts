/** The agent: store, uplink, links, measuring and judging of one station, started, watched and stopped together. */

import type { AlarmInput, StoredRow } from '../alarm/effects.ts';
import { restoreAlarms } from '../alarm/engine.ts';
import { planAlarms } from '../alarm/plan.ts';
import { ForebayError } from '../config/errors.ts';
import type { Point, Station } from '../config/station.ts';
import type { Reading } from '../measure/reading.ts';
import { newestRunS } from '../snapshot/shelf.ts';
import { storeLimits } from '../store/limits.ts';
import { makeDirectory } from '../store/open-file.ts';
import type { OpenReport } from '../store/types.ts';
import { WorkerStore } from '../store/worker-store.ts';
import { MessageIds } from '../uplink/message-ids.ts';
import { emptyingMessage, outboxMessage } from '../uplink/payload.ts';
import { emptyForgotten } from '../uplink/retained.ts';
import { topicsOf } from '../uplink/topics.ts';
import { Uplink, type UplinkCounters, type UplinkHost } from '../uplink/uplink.ts';
import { clockState, type StationClock, systemClock } from './clock.ts';
import { HealthPost } from './health-post.ts';
import { noteEntry } from './journal-entry.ts';
import { Judging } from './judging.ts';
import { Learning } from './learning.ts';
import { LiveJudge } from './live-judge.ts';
import type { Log } from './log.ts';
import { MeasuringRoom } from './measuring-room.ts';
import { ownTopics } from './own-topics.ts';
import { ReadingPost } from './reading-post.ts';
import { needsRestart, sameUplink, uplinkSettings } from './reload.ts';
import { riseInputs } from './rises.ts';
import type { ServiceManager } from './service-manager.ts';
import { SnapshotAsks } from './snapshot-asks.ts';
import { SnapshotKeeper, snapshotFolder } from './snapshot-keeper.ts';
import { answerAsks } from './station-asks.ts';
import { ringSecondsOf, StationLinks, setupOf } from './station-links.ts';
import { StoreWatch } from './store-watch.ts';
import { Supervision } from './supervision.ts';
import { ToldValues, toldTopics } from './told.ts';
import { trendWatches } from './trend-watches.ts';
import { Vitals } from './vitals.ts';
import { within } from './within.ts';

const TICK_MS = 1000;
const CLOCK_CHECK_S = 600;
const RISES_EVERY_S = 3600;
/** What each part of a stop may take; together less than 5 s. What is not sent by then stays in the store. */
const STOP_MS = { links: 600, judging: 700, snapshots: 600, uplink: 1800, store: 700 };

export interface AgentOptions {
  version: string;
  log: Log;
  clock?: StationClock;
  /** Something broke that only a new start mends. */
  fatal(error: Error): void;
  /** Whoever started the agent and wants to know how it is. */
  manager?: ServiceManager;
}

/** What there is once the store is open. */
interface Parts {
  uplink: Uplink;
  ids: MessageIds;
  judge: LiveJudge;
  judging: Judging;
  post: ReadingPost;
  learning: Learning;
  keeper: SnapshotKeeper;
  snapshots: SnapshotAsks;
}

export class Agent {
  #station: Station;
  readonly #options: AgentOptions;
  readonly #clock: StationClock;
  readonly #log: Log;
  readonly #store: WorkerStore;
  readonly #room: MeasuringRoom;
  readonly #links: StationLinks;
  readonly #told: ToldValues;
  readonly #supervision: Supervision | null;
  readonly #vitals: Vitals;
  readonly #watch: StoreWatch;
  #parts: Parts | null = null;
  #clockSays: 'synchronised' | 'free' = 'free';
  #timer: NodeJS.Timeout | null = null;
  #tickS = 0;
  #health: HealthPost | null = null;
  #clockS = 0;
  #risesS = 0;
  #reloading: Promise<void> = Promise.resolve();

  constructor(station: Station, options: AgentOptions) {
    this.#station = station;
    this.#options = options;
    this.#clock = options.clock ?? systemClock;
    this.#log = options.log;
    const { directory, maxMb } = station.storage;
    this.#store = new WorkerStore({
      directory,
      maxMb,
      limits: storeLimits(maxMb),
      onDown: (error) => void this.#watch.reopen(error),
    });
    this.#vitals = new Vitals(() => this.#clock.monotonicS());
    this.#watch = new StoreWatch({
      store: this.#store,
      log: this.#log,
      monotonicS: () => this.#clock.monotonicS(),
      disk: (trouble) => this.#gateway('disk', trouble !== null, trouble),
      storage: () => void this.#parts?.uplink.agentChanged(),
      fatal: (error) => this.#options.fatal(error),
    });
    this.#told = new ToldValues(toldTopics(station.machines), () => this.#clock.monotonicS());
    this.#room = new MeasuringRoom(setupOf(station), {
      workerLost: (reason) => this.#gateway('measuring', true, reason),
      workerBack: () => this.#gateway('measuring', false, null),
    });
    this.#links = new StationLinks(station, this.#room, this.#told, {
      wallMs: () => this.#clock.wallMs(),
      reading: (point, reading, wallMs, elapsedS) => this.#reading(point, reading, wallMs, elapsedS),
      condition: (link, conditions, why) => {
        if (why !== null) this.#log.warn(`link ${link} is not receiving`, { conditions, why });
        this.#health?.linkChanged(link, why === null, this.#clock.monotonicS());
        void this.#parts?.judge.take({ kind: 'link', link, conditions, detail: why, t: this.#now() });
      },
    });
    this.#supervision =
      options.manager === undefined
        ? null
        : new Supervision(options.manager, {
            links: () => this.#links.health(),
            measuring: () => ({ waiting: this.#room.waiting, settled: this.#room.settled }),
            store: this.#store,
            monotonicS: () => this.#clock.monotonicS(),
            log: this.#log,
          });
  }

  /** The port of the embedded broker; null: the broker is another's. */
  get embeddedPort(): number | null {
    return this.#parts?.uplink.embeddedPort ?? null;
  }

  /** @throws ForebayError where the storage is locked or unwritable or the embedded broker's port is busy. */
  async start(): Promise<void> {
    const { directory } = this.#station.storage;
    makeDirectory(directory);
    const report = await this.#watch.open(newestRunS(snapshotFolder(directory)));
    this.#clockSays = await clockState();
    const parts = await this.#assemble(report);
    this.#parts = parts;
    if (report.setAside) {
      const { reason, path } = report.setAside;
      this.#log.warn('the database was broken and has been set aside', { reason, path });
      this.#gateway('database', true, `${reason}; it was set aside as ${path} and a fresh one begun`);
    } else this.#gateway('database', false, null);
    // What stood when the last run ended has to show anew.
    for (const condition of ['disk', 'measuring', 'configuration'] as const)
      this.#gateway(condition, false, null);
    await parts.uplink.start();
    this.#links.start();
    this.#vitals.start();
    this.#tickS = this.#clock.monotonicS();
    this.#health = this.#makeHealth(parts);
    this.#risesS = this.#tickS - RISES_EVERY_S;
    this.#timer = setInterval(() => this.#tick(), TICK_MS);
    this.#log.info('running', { site: this.#station.site.id, config: this.#station.configHash });
    void this.#options.manager?.ready();
  }

  /** Says offline, sends what can be sent, keeps the rest. Done in less than 5 s, whatever hangs. */
  async stop(): Promise<void> {
    void this.#options.manager?.stopping();
    if (this.#timer) clearInterval(this.#timer);
    await within(STOP_MS.links, this.#links.stop());
    this.#logLinks();
    await this.#room.stop();
    const parts = this.#parts;
    if (parts) {
      await within(
        STOP_MS.judging,
        parts.judge.stop().then(() => parts.learning.stop()),
      );
      await within(STOP_MS.snapshots, parts.keeper.stop());
      await within(STOP_MS.uplink + 200, parts.uplink.stop(STOP_MS.uplink));
    }
    await within(STOP_MS.store, this.#store.close());
    this.#vitals.stop();
    this.#log.info('stopped');
  }

  /**
   * Goes on with what `read` gives, or with what there was where that fails or cannot be had without a restart. Either
   * way it is told, in the log and by the alarm of the gateway's configuration.
   */
  reload(read: () => Station): Promise<void> {
    this.#reloading = this.#reloading.then(async () => {
      try {
        const next = read();
        await this.#goOnWith(next);
        this.#log.info('configuration taken', { config: next.configHash });
        this.#gateway('configuration', false, null);
      } catch (error) {
        this.#log.error('the new configuration is refused, the old one stays', error);
        const [first = '', second = ''] = (error as Error).message.split('\n');
        this.#gateway('configuration', true, `${first} ${second}`.trim().slice(0, 300));
      }
    });
    return this.#reloading;
  }

  async #goOnWith(next: Station): Promise<void> {
    const parts = this.#parts;
    if (!parts) return;
    const why = needsRestart(this.#station, next);
    if (why !== null) throw new ForebayError('config.needs-restart', why);
    const plan = planAlarms(next);
    const ringSeconds = ringSecondsOf(next);
    if (!sameUplink(this.#station, next)) await this.#exchangeUplink(next);
    this.#station = next;
    this.#told.listenTo(toldTopics(next.machines));
    const judged = parts.judge.replan(plan, this.#now());
    parts.post.replan(next.publish, trendWatches(next), (key) => plan.points.has(key));
    await this.#links.replan(next, ringSeconds);
    await judged;
    await emptyForgotten(this.#store, parts.ids, ownTopics(next, plan, topicsOf(next.site.id)));
    await parts.uplink.agentChanged();
    parts.uplink.kick();
  }

  /** Another broker, or other topics to listen to. Where it cannot start, the one of before comes back. */
  async #exchangeUplink(next: Station): Promise<void> {
    const parts = this.#parts;
    if (!parts) return;
    await parts.uplink.stop(STOP_MS.uplink);
    const begin = async (station: Station) => {
      parts.uplink = this.#makeUplink(station, parts.ids, parts.uplink.counters);
      answerAsks(parts.uplink, { ...parts, store: this.#store, now: () => this.#now() });
      parts.snapshots.answer(parts.uplink);
      await parts.uplink.start();
    };
    try {
      await begin(next);
    } catch (error) {
      await begin(this.#station);
      throw error;
    }
  }

  async #assemble(report: OpenReport) {
    const station = this.#station;
    const store = this.#store;
    const topics = topicsOf(station.site.id);
    const ids = new MessageIds(report.storeId, report.nextN);
    const plan = planAlarms(station);
    const rows = Object.entries(await store.alarmStates()).map(([key, json]) => [
      key,
      JSON.parse(json) as StoredRow,
    ]);
    const nextId = () => ids.idOf(ids.take());
    const restored = restoreAlarms(plan, Object.fromEntries(rows), this.#now(), nextId);
    const judging = new Judging(plan, restored.state, nextId);
    const uplink = this.#makeUplink(station, ids);
    const kick = () => (this.#parts?.uplink ?? uplink).kick();
    const keeper = this.#makeKeeper(judging);
    const judge = new LiveJudge(judging, {
      commit: (commit) => store.commit({ ...commit, nextN: ids.nextN }),
      topic: topics.below,
      emptying: (name, topic) => emptyingMessage(ids, name, topic),
      committed: () => {
        kick();
        this.#watch.works();
      },
      evidence: (effect, reading) => keeper.evidence(effect, reading),
      snapshotOf: (alarm, state) => keeper.snapshotOf(alarm, state),
      commitFailed: (error) => this.#watch.failed(error),
      inputFailed: (error) => this.#log.error('an alarm input could not be judged', error),
      monotonicS: () => this.#clock.monotonicS(),
    });
    const post = new ReadingPost(station.publish, trendWatches(station), {
      commit: (commit) => store.commit(commit),
      committed: kick,
      message: (pointKey, body) => outboxMessage(ids, 'reading', topics.reading(pointKey), body),
      monotonicS: () => this.#clock.monotonicS(),
      lost: (error) => this.#watch.failed(error),
    });
    await judge.restore(restored.effects);
    await emptyForgotten(store, ids, ownTopics(station, plan, topics));
    const learning = new Learning(await store.baselines(), {
      plan: () => judging.plan,
      commit: (commit, note) => {
        const journal = note ? [noteEntry(ids, note.machine, note, this.#now())] : [];
        return store.commit({ ...commit, journal });
      },
      failed: (error) => this.#watch.failed(error),
      now: () => this.#now(),
    });
    answerAsks(uplink, { judge, post, store, ids, judging, learning, now: () => this.#now() });
    const snapshots = new SnapshotAsks({
      keeper,
      station: () => this.#station,
      wallMs: () => this.#clock.wallMs(),
    });
    snapshots.answer(uplink);
    return { uplink, ids, judge, judging, post, learning, keeper, snapshots };
  }

  #makeKeeper(judging: Judging): SnapshotKeeper {
    return new SnapshotKeeper(this.#options.version, {
      station: () => this.#station,
      source: (link) => this.#links.source(link),
      wallMs: () => this.#clock.wallMs(),
      monotonicS: () => this.#clock.monotonicS(),
      runS: () => this.#watch.runS,
      clock: () => this.#clockSays,
      unacknowledged: (alarm) =>
        ['unacknowledged', 'returned-unacknowledged'].includes(judging.state.alarms[alarm]?.life.state ?? ''),
      running: (machine) => judging.state.machines[machine]?.running ?? null,
      log: (message, details) => this.#log.warn(message, details),
    });
  }

  #makeUplink(station: Station, ids: MessageIds, counters?: UplinkCounters): Uplink {
    const host: UplinkHost = {
      store: this.#store,
      ids,
      runS: () => this.#watch.runS,
      now: () => this.#now(),
      agent: () => ({
        version: this.#options.version,
        config: this.#station.configHash,
        clock: this.#clockSays,
        storage: this.#watch.says,
      }),
      command: (topic, text, retained) => this.#told.hear(topic, text, retained),
      log: (level, message, details) => {
        if (level === 'info') this.#log.info(message, details);
        else this.#log.warn(message, details);
      },
    };
    return new Uplink(uplinkSettings(station), host, counters);
  }

  #reading(point: Point, measured: Reading, wallMs: number, elapsedS: number | null): void {
    const parts = this.#parts;
    if (!parts) return;
    const reading = parts.judging.settled(point.key, measured);
    const t = new Date(wallMs).toISOString();
    const { learning, judging, keeper } = parts;
    keeper.noteReading(point.machineId, reading);
    const baseline = learning.baselineOf(point.key);
    void parts.judge
      .take({ kind: 'reading', pointKey: point.key, reading, t, elapsedS, baseline })
      .then(() => learning.take(point.key, reading, judging.state));
    const findings = parts.judging.noteReading(point.key, reading);
    if (findings) void parts.judge.take({ kind: 'findings', ...findings, t });
    void parts.post.take(point.key, t, reading);
  }

  #tick(): void {
    const nowS = this.#clock.monotonicS();
    const elapsedS = nowS - this.#tickS;
    void this.#parts?.judge.take({ kind: 'tick', elapsedS, t: this.#now() });
    this.#links.tick(elapsedS);
    this.#parts?.learning.tick(elapsedS);
    this.#parts?.post.tick();
    this.#parts?.keeper.tick();
    this.#supervision?.tick();
    this.#health?.tick(nowS);
    this.#tickS = nowS;
    if (nowS - this.#clockS >= CLOCK_CHECK_S) {
      this.#clockS = nowS;
      void this.#checkClock();
    }
    if (nowS - this.#risesS >= RISES_EVERY_S) {
      this.#risesS = nowS;
      this.#watchRises().catch((error) => this.#watch.failed(error));
    }
  }

  async #watchRises(): Promise<void> {
    const parts = this.#parts;
    if (!parts) return;
    for await (const input of riseInputs(parts.judging.plan, this.#store, this.#now())) {
      await parts.judge.take(input);
    }
  }

  async #checkClock(): Promise<void> {
    const says = await clockState();
    if (says === this.#clockSays) return;
    this.#clockSays = says;
    await this.#parts?.uplink.agentChanged();
  }

  #makeHealth(parts: Parts): HealthPost {
    return new HealthPost(
      {
        store: this.#store,
        ids: parts.ids,
        vitals: this.#vitals,
        directory: this.#station.storage.directory,
        uplink: () => parts.uplink,
        links: () => this.#links.health(),
        measuring: () => ({
          waiting: this.#room.waiting,
          missed: this.#room.missed,
          skipped: this.#links.skipped,
          worker_restarts: this.#room.workerRestarts,
          readings_lost: parts.post.lost,
          readings_held: parts.post.held,
          alarm_inputs_dropped: parts.judge.dropped,
          told_unreadable: this.#told.unreadable,
        }),
        snapshots: () => parts.keeper.counters(),
        now: () => this.#now(),
        failed: (error) => this.#watch.failed(error),
      },
      this.#tickS,
    );
  }

  #gateway(
    condition: Extract<AlarmInput, { kind: 'gateway' }>['condition'],
    holds: boolean,
    detail: string | null,
  ): void {
    void this.#parts?.judge.take({ kind: 'gateway', condition, holds, detail, t: this.#now() });
    this.#health?.changed(this.#clock.monotonicS());
  }

  #logLinks(): void {
    for (const [link, health] of Object.entries(this.#links.health())) {
      const { frames, errors, gaps, missingSamples, head } = health;
      this.#log.info('link', { link, frames, errors, gaps, missing_samples: missingSamples, head });
    }
  }

  #now(): string {
    return new Date(this.#clock.wallMs()).toISOString();
  }
}
