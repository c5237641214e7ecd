/** `forebay pull`: gets a waveform of a station over MQTT, in parts, and goes on where it was broken off. */

import { randomBytes } from 'node:crypto';
import { existsSync } from 'node:fs';
import { ForebayError } from '../config/errors.ts';
import { topicsOf } from '../uplink/topics.ts';
import { PartFile, savedOf, type WholeFile } from './part-file.ts';
import { ProgressBar, type ProgressOutput } from './progress-bar.ts';
import { type BrokerOptions, PullLink } from './pull-link.ts';

export interface PullOptions extends BrokerOptions {
  site: string;
  /** One of the two. */
  snapshot: string | null;
  point: string | null;
  /** Of a point: how much is taken. Of a snapshot: how much of it is wanted. */
  seconds: number | null;
  /** Of a snapshot: from where on. */
  fromS: number | null;
  /** Of a snapshot, by name or point; null: all. */
  channels: readonly string[] | null;
  file: string;
  force: boolean;
  err: ProgressOutput;
  /** Breaks off, keeping what is there; left out, Ctrl-C does. */
  signal?: AbortSignal;
}

const STATION_MS = 5000;
const ANSWER_MS = 60_000;
/** Without a part for so long, what lacks is asked for again. */
const SILENT_MS = 20_000;
const MAX_SILENCES = 10;
/** As many as one ask may name. */
const MAX_PARTS_ASKED = 500;
const SAVE_EVERY_MS = 2000;

/** 0: the file is there and whole; 1: broken off by the person, to be gone on with. */
export async function pullCommand(options: PullOptions): Promise<number> {
  if ((options.snapshot === null) === (options.point === null))
    throw new ForebayError('command.usage', 'give one of --snapshot and --point');
  if (!options.force && existsSync(options.file))
    throw new ForebayError('file.exists', `${options.file} is there already`);
  const stop = new AbortController();
  const interrupt = () => stop.abort();
  process.once('SIGINT', interrupt);
  options.signal?.addEventListener('abort', interrupt);
  const pull = new Pull(options, stop.signal);
  try {
    return await pull.run();
  } finally {
    process.off('SIGINT', interrupt);
    await pull.close();
  }
}

type Answer = Record<string, unknown>;

/** Thrown where the person breaks off. */
class Interrupted extends Error {}

class Pull {
  readonly #options: PullOptions;
  readonly #stop: AbortSignal;
  readonly #topics: ReturnType<typeof topicsOf>;
  readonly #bar: ProgressBar;
  #link: PullLink | null = null;
  #file: PartFile | null = null;
  /** The fetch under way, and the parts that it brings. */
  #fetchId: string | null = null;
  #expected: readonly number[] = [];
  #early: { part: number; payload: Buffer }[] = [];
  #hear: (topic: string, payload: Buffer) => void = () => undefined;
  #wake: () => void = () => undefined;
  #onBack: () => void = () => undefined;
  #reconnected = false;
  #trouble: ForebayError | null = null;

  constructor(options: PullOptions, stop: AbortSignal) {
    this.#options = options;
    this.#stop = stop;
    this.#topics = topicsOf(options.site);
    this.#bar = new ProgressBar(options.err);
  }

  async run(): Promise<number> {
    try {
      this.#link = await PullLink.connect(this.#options, {
        message: (topic, payload) => this.#message(topic, payload),
        back: () => {
          this.#reconnected = true;
          this.#onBack();
          this.#wake();
        },
        lost: () => this.#say('the connection to the broker is lost; trying again'),
      });
      await this.#seeStation();
      const snapshot = this.#options.snapshot ?? (await this.#takeOne());
      await this.#fetchAll(snapshot);
      const file = this.#file;
      this.#file = null;
      await file?.finish();
      this.#bar.end();
      this.#say(`${this.#options.file}: ${snapshot}, verified`);
      return 0;
    } catch (error) {
      this.#bar.end();
      if (!(error instanceof Interrupted)) throw error;
      this.#cancel();
      this.#say(`broken off; the same command with --snapshot goes on from ${this.#options.file}.part`);
      return 1;
    }
  }

  async close(): Promise<void> {
    if (this.#file) {
      this.#file.save();
      this.#file.close();
    }
    await this.#link?.close();
  }

  #say(text: string): void {
    this.#options.err.write(`pull: ${text}\n`);
  }

  async #seeStation(): Promise<void> {
    const { site, broker } = this.#options;
    const said = await this.#wait<Answer>(STATION_MS, async (resolve) => {
      this.#hear = (topic, payload) => {
        if (topic === this.#topics.agent && payload.length > 0) resolve(parsed(payload));
      };
      await this.#link?.subscribe(this.#topics.agent);
    });
    await this.#link?.unsubscribe(this.#topics.agent);
    if (said === null) throw new ForebayError('pull.no-station', `${broker} knows of no station ${site}`);
    if (said.state !== 'online')
      throw new ForebayError(
        'pull.offline',
        `station ${site} is offline; its last word is of ${String(said.t)}`,
      );
  }

  /** Has the station take a snapshot now; where one was begun with, that one. */
  async #takeOne(): Promise<string> {
    const { point, seconds, file } = this.#options;
    const begun = savedOf(file);
    if (begun) {
      this.#say(`going on with ${begun.snapshot}; remove ${file}.part for a new one`);
      return begun.snapshot;
    }
    this.#say(`asking for a snapshot of ${point}`);
    const answer = await this.#ask('snapshot', { point, ...(seconds === null ? {} : { seconds }) });
    return String(answer.snapshot);
  }

  async #fetchAll(snapshot: string): Promise<void> {
    const cut = this.#cut();
    const begun = savedOf(this.#options.file);
    let wanted: readonly number[] | null = null;
    if (begun) {
      // What the file is now decides whether what is there belongs to it.
      await this.#fetch(snapshot, cut, []);
      wanted = this.#file!.missing;
      if (begun.have.length > 0) this.#say(`${begun.have.length} of ${begun.parts} parts are here already`);
    }
    let silences = 0;
    while (wanted === null || wanted.length > 0) {
      await this.#fetch(snapshot, cut, wanted);
      const before = this.#file!.missing.length;
      await this.#receive();
      wanted = this.#file!.missing;
      silences = wanted.length < before || this.#reconnected ? 0 : silences + 1;
      if (silences >= MAX_SILENCES)
        throw new ForebayError('pull.stalled', `nothing comes from station ${this.#options.site} any more`);
    }
  }

  #cut(): Record<string, unknown> {
    const { snapshot, seconds, fromS, channels } = this.#options;
    if (snapshot === null) return {};
    return {
      ...(seconds === null ? {} : { seconds }),
      ...(fromS === null ? {} : { from_s: fromS }),
      ...(channels === null ? {} : { channels }),
    };
  }

  /** Asks for parts; null: all of them. What was asked for before is called off. */
  async #fetch(
    snapshot: string,
    cut: Record<string, unknown>,
    parts: readonly number[] | null,
  ): Promise<void> {
    const before = this.#fetchId;
    const id = newId();
    this.#fetchId = id;
    this.#early = [];
    this.#expected = [];
    const asked = parts?.slice(0, MAX_PARTS_ASKED);
    const body = {
      snapshot,
      ...cut,
      ...(asked ? { parts: asked } : {}),
      ...(before === null ? {} : { cancel: before }),
    };
    const answer = await this.#ask('fetch', body, id);
    if (before !== null) await this.#link?.unsubscribe(`${this.#topics.answer(before)}/#`);
    const whole = wholeOf(answer, snapshot);
    if (this.#file && this.#file.whole.sha256 !== whole.sha256) {
      this.#file.close();
      this.#file = null;
    }
    this.#file ??= new PartFile(this.#options.file, whole);
    const list = asked ?? Array.from({ length: whole.parts }, (_, part) => part);
    this.#expected = list.slice(0, Number(answer.sending ?? list.length));
    for (const { part, payload } of this.#early.splice(0)) this.#put(this.#file, part, payload);
  }

  /** Until what was asked for is there, or nothing comes for a while, or the connection is a new one. */
  async #receive(): Promise<void> {
    const file = this.#file!;
    this.#reconnected = false;
    let savedMs = performance.now();
    const open = () => this.#expected.some((part) => !file.has(part));
    while (open() && !this.#reconnected) {
      const woken = await this.#wait<true>(SILENT_MS, (resolve) => {
        this.#wake = () => resolve(true);
      });
      if (this.#trouble) throw this.#trouble;
      if (performance.now() - savedMs > SAVE_EVERY_MS) {
        savedMs = performance.now();
        file.save();
      }
      if (woken === null) return;
    }
  }

  /** One ask, asked again after each new connection. @throws ForebayError with the reason of the station. */
  async #ask(
    verb: 'snapshot' | 'fetch',
    body: Readonly<Record<string, unknown>>,
    id = newId(),
  ): Promise<Answer> {
    const topic = this.#topics.answer(id);
    await this.#link?.subscribe(`${topic}/#`);
    const answer = await this.#wait<Answer>(ANSWER_MS, (resolve) => {
      this.#hear = (name, payload) => {
        if (name === topic) resolve(parsed(payload));
      };
      const ask = () => this.#link?.publish(this.#topics.ask(verb), { id, ...body });
      // A repeat of an id is ignored by the station, so asking again does nothing twice.
      this.#onBack = ask;
      ask();
    });
    this.#onBack = () => undefined;
    if (answer === null)
      throw new ForebayError('pull.stalled', `station ${this.#options.site} does not answer ask/${verb}`);
    if (answer.ok !== true) throw refused(answer);
    return answer;
  }

  /** null: it took too long. */
  async #wait<T>(ms: number, start: (resolve: (value: T) => void) => unknown): Promise<T | null> {
    if (this.#stop.aborted) throw new Interrupted();
    let timer: NodeJS.Timeout | undefined;
    let onStop: (() => void) | undefined;
    try {
      return await new Promise<T | null>((resolve, reject) => {
        timer = setTimeout(() => resolve(null), ms);
        onStop = () => reject(new Interrupted());
        this.#stop.addEventListener('abort', onStop);
        Promise.resolve(start(resolve)).catch(reject);
      });
    } finally {
      clearTimeout(timer);
      if (onStop) this.#stop.removeEventListener('abort', onStop);
    }
  }

  #message(topic: string, payload: Buffer): void {
    const id = this.#fetchId;
    const parts = id === null ? null : `${this.#topics.answer(id)}/`;
    if (parts !== null && topic.startsWith(parts)) {
      this.#part(Number(topic.slice(parts.length)), payload);
      return;
    }
    if (id !== null && topic === this.#topics.answer(id)) {
      const answer = parsed(payload);
      if (this.#file && answer.ok === false) this.#trouble = refused(answer);
    }
    this.#hear(topic, payload);
    if (this.#trouble) this.#wake();
  }

  /** A part may overtake the answer that says of what it is one. */
  #part(part: number, payload: Buffer): void {
    const file = this.#file;
    if (!file || this.#expected.length === 0) this.#early.push({ part, payload });
    else this.#put(file, part, payload);
  }

  #put(file: PartFile, part: number, payload: Buffer): void {
    if (!file.put(part, payload)) return;
    this.#bar.show(file.bytesHere, file.whole.bytes);
    this.#wake();
  }

  #cancel(): void {
    const [snapshot, cancel] = [this.#file?.whole.snapshot, this.#fetchId];
    if (snapshot && cancel)
      this.#link?.publish(this.#topics.ask('fetch'), { id: newId(), snapshot, cancel, parts: [] });
  }
}

function newId(): string {
  return `pull-${randomBytes(6).toString('hex')}`;
}

function parsed(payload: Buffer): Answer {
  try {
    return JSON.parse(payload.toString('utf8')) as Answer;
  } catch {
    return {};
  }
}

function refused(answer: Answer): ForebayError {
  const reason = String(answer.error ?? 'without a reason');
  return reason.startsWith('the daily budget')
    ? new ForebayError('pull.budget', reason)
    : new ForebayError('pull.refused', `refused by the station: ${reason}`);
}

function wholeOf(answer: Answer, snapshot: string): WholeFile {
  const { bytes, sha256, part_bytes: partBytes, parts } = answer;
  const numbers = [bytes, partBytes, parts].every(
    (value) => Number.isSafeInteger(value) && Number(value) > 0,
  );
  const fit = numbers && Number(parts) === Math.ceil(Number(bytes) / Number(partBytes));
  if (!fit || typeof sha256 !== 'string')
    throw new ForebayError('pull.refused', 'the station answers with something else than a file');
  return { snapshot, bytes: Number(bytes), sha256, partBytes: Number(partBytes), parts: Number(parts) };
}
