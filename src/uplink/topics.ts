/** Names of topics. Everything that the agent sends or hears under `forebay/<site>/` is built here. */

export interface Topics {
  readonly agent: string;
  readonly health: string;
  /** The full topic of one that is named from the site on. */
  below(name: string): string;
  /** What the agent subscribes to. */
  readonly asks: string;
  reading(pointKey: string): string;
  /** `<machine>/<point>.<rule>` or `<machine>/machine.<rule>`. */
  alarm(machine: string, subject: string, rule: string): string;
  /** Of a link, a node or the gateway: `<link>.<rule>`, `gateway.<rule>`. */
  agentAlarm(subject: string, rule: string): string;
  state(machine: string): string;
  finding(machine: string): string;
  ask(verb: string): string;
  answer(askId: string): string;
  answerPart(askId: string, part: number): string;
  /** The verb of a topic of `asks`; null: another topic. */
  verbOf(topic: string): string | null;
}

export function topicsOf(site: string): Topics {
  const root = `forebay/${site}/`;
  const askRoot = `${root}ask/`;
  return {
    agent: `${root}agent`,
    health: `${root}health`,
    below: (name) => `${root}${name}`,
    asks: `${askRoot}+`,
    reading: (pointKey) => `${root}${pointKey}/reading`,
    alarm: (machine, subject, rule) => `${root}${machine}/alarm/${subject}.${rule}`,
    agentAlarm: (subject, rule) => `${root}agent/alarm/${subject}.${rule}`,
    state: (machine) => `${root}${machine}/state`,
    finding: (machine) => `${root}${machine}/finding`,
    ask: (verb) => `${askRoot}${verb}`,
    answer: (askId) => `${root}answer/${askId}`,
    answerPart: (askId, part) => `${root}answer/${askId}/${part}`,
    verbOf: (topic) => (topic.startsWith(askRoot) ? topic.slice(askRoot.length) : null),
  };
}

/**
 * Why a broker would drop the connection over this topic, or null. MQTT 5, 1.5.4 and 4.7: no wildcard in a topic name,
 * no U+0000, not empty, at most 65 535 bytes.
 */
export function topicTrouble(topic: string): string | null {
  if (topic === '') return 'the topic is empty';
  if (/[+#\0]/.test(topic)) return 'the topic holds a wildcard or a NUL';
  if (Buffer.from(topic).toString() !== topic) return 'the topic is not valid Unicode';
  return Buffer.byteLength(topic) > 65_535 ? 'the topic is longer than 65 535 bytes' : null;
}
