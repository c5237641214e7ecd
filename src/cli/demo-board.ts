import { soundMachine, worseningMachine } from './demo-station.ts';

/** What the demo has heard on the broker, as any client would, and whether it is what was promised. */

/** The keys of the payloads that are looked at. */
interface ReadingHeard {
  quality?: string;
  running?: boolean | null;
  velocity?: { overall?: number | null };
  envelope?: {
    defect?: string | null;
    bpfo?: { over_floor_db?: number | null; modulation?: number | null } | null;
  } | null;
  zone?: string | null;
}

interface AlarmHeard {
  snapshot?: string | null;
  state?: string;
  level?: string;
  reason?: string;
  check?: string;
}

interface FindingHeard {
  findings?: { fault?: string; likelihood?: string; points?: string[]; evidence?: string[] }[];
}

export interface PointRow {
  readonly reading: ReadingHeard;
  readonly readings: number;
  /** Readings with a velocity. */
  readonly measured: number;
}

interface AlarmRow extends AlarmHeard {
  /** Seconds into the demo of the last change. */
  readonly atS: number;
}

/** States in which an alarm stands or has not been seen to. */
const raisedStates = new Set(['unacknowledged', 'acknowledged', 'returned-unacknowledged']);

export class DemoBoard {
  /** By `machine/point`. */
  readonly points = new Map<string, PointRow>();
  /** By `machine/point.rule`; those of links as `agent/link.rule`. */
  readonly alarms = new Map<string, AlarmRow>();
  readonly findings = new Map<string, string>();
  messages = 0;
  bytes = 0;
  readonly #defectsHeard = new Map<string, string>();
  readonly #checksTold = new Set<string>();
  readonly #prefix: string;

  constructor(site: string) {
    this.#prefix = `forebay/${site}/`;
  }

  /**
   * @param packetBytes the whole PUBLISH packet
   * @returns what is worth a line of its own: alarms and findings that changed
   */
  accept(topic: string, payload: string, packetBytes: number, atS: number): string[] {
    if (!topic.startsWith(this.#prefix)) return [];
    const [machine = '', second = '', third = ''] = topic.slice(this.#prefix.length).split('/');
    // The waveform that is asked for at the end is told of by itself, and its parts are no JSON.
    if (machine === 'ask' || machine === 'answer') return [];
    this.messages++;
    this.bytes += packetBytes;
    if (payload === '') return [];
    const body: unknown = JSON.parse(payload);
    if (third === 'reading') return this.#reading(`${machine}/${second}`, body as ReadingHeard);
    if (second === 'alarm') return this.#alarm(`${machine}/${third}`, body as AlarmHeard, atS);
    if (second === 'finding') return this.#finding(machine, body as FindingHeard);
    if (machine === 'agent' && second === '') return [`agent ${(body as { state?: string }).state ?? '?'}`];
    return [];
  }

  /** Alarms of a machine, or of links (`agent`), that were ever raised. */
  alarmsOf(machine: string): [string, AlarmRow][] {
    return [...this.alarms].filter(([key]) => key.startsWith(`${machine}/`));
  }

  /** Name of the waveform that an alarm of the worsening machine has; null: none has one. */
  snapshot(): string | null {
    for (const [, { snapshot }] of this.alarmsOf(worseningMachine)) if (snapshot) return snapshot;
    return null;
  }

  /** What the demo promises and has not been seen; empty: it kept its word. */
  missing(): string[] {
    const missing: string[] = [];
    const points = [...this.points];
    const of = (machine: string) => points.filter(([key]) => key.startsWith(`${machine}/`));
    for (const machine of [soundMachine, worseningMachine]) {
      const unmeasured = 3 - of(machine).filter(([, row]) => row.measured >= 2).length;
      if (unmeasured > 0)
        missing.push(`${unmeasured} of the 3 points of ${machine} gave less than two velocities`);
    }
    for (const [key, { reason }] of this.alarmsOf(soundMachine)) {
      missing.push(`${soundMachine} is sound, yet ${key} was raised: ${reason ?? 'no reason given'}`);
    }
    const accused = [...this.#defectsHeard];
    for (const [key, defect] of accused.filter(([point]) => point.startsWith(`${soundMachine}/`))) {
      missing.push(`${soundMachine} is sound, yet a reading of ${key} accused: ${defect}`);
    }
    if (this.alarmsOf(worseningMachine).length === 0)
      missing.push(`no alarm of ${worseningMachine} was raised`);
    if (!accused.some(([point, defect]) => point.startsWith(`${worseningMachine}/`) && defect === 'outer')) {
      missing.push(`no reading of ${worseningMachine} named the outer race`);
    }
    return missing;
  }

  #reading(key: string, reading: ReadingHeard): string[] {
    const before = this.points.get(key);
    const measured = typeof reading.velocity?.overall === 'number' ? 1 : 0;
    this.points.set(key, {
      reading,
      readings: (before?.readings ?? 0) + 1,
      measured: (before?.measured ?? 0) + measured,
    });
    const defect = reading.envelope?.defect ?? null;
    if (defect === null || this.#defectsHeard.get(key) === defect) return [];
    this.#defectsHeard.set(key, defect);
    return [`${key}: a reading names the part ${defect}`];
  }

  #alarm(key: string, alarm: AlarmHeard, atS: number): string[] {
    const before = this.alarms.get(key);
    if (before === undefined && !raisedStates.has(alarm.state ?? '')) return [];
    // A change that ends it says that it is over; the reason to remember is why it was raised.
    const reason = alarm.state === 'unacknowledged' ? alarm.reason : before?.reason;
    this.alarms.set(key, { ...alarm, ...(reason === undefined ? {} : { reason }), atS });
    if (before?.state === alarm.state && before?.level === alarm.level) return [];
    if (alarm.state === 'normal') return [`alarm ${key} is back to normal`];
    const lines = [`ALARM ${key} ${alarm.level ?? ''}, ${alarm.state ?? '?'}: ${alarm.reason ?? ''}`];
    if (alarm.check && !this.#checksTold.has(alarm.check)) {
      this.#checksTold.add(alarm.check);
      lines.push(`      check: ${alarm.check}`);
    }
    return lines;
  }

  #finding(machine: string, { findings = [] }: FindingHeard): string[] {
    const text = findings
      .map(({ fault, likelihood, points, evidence }) => {
        const where = points && points.length > 0 ? ` at ${points.join(', ')}` : '';
        return `${fault} (${likelihood})${where}${evidence?.[0] ? `: ${evidence[0]}` : ''}`;
      })
      .join('; ');
    if (this.findings.get(machine) === text || (text === '' && !this.findings.has(machine))) return [];
    this.findings.set(machine, text);
    return [`finding of ${machine}: ${text === '' ? 'none any more' : text}`];
  }
}
