/** A client of the agent, as any other: it asks over the broker and waits for the answer. For the commands. */

import { randomBytes } from 'node:crypto';
import mqtt, { type IClientOptions, type MqttClient } from 'mqtt';
import { ForebayError } from '../config/errors.ts';
import type { Station } from '../config/station.ts';
import { AskRefused } from './asks.ts';
import { accessRemote } from './broker-access.ts';
import { parseBrokerUrl } from './dial.ts';
import type { AskVerb } from './payload-schemas.ts';
import { type Topics, topicsOf } from './topics.ts';

const CONNECT_MS = 15_000;
const ANSWER_MS = 20_000;
/** The agent takes ten asks at once and one a second in the long run; others may ask as well. */
const PACE_MS = 1200;
const AT_ONCE = 4;

export class AskClient {
  readonly #client: MqttClient;
  readonly #topics: Topics;
  #asked = 0;
  #askedMs = 0;

  private constructor(client: MqttClient, site: string) {
    this.#client = client;
    this.#topics = topicsOf(site);
  }

  /**
   * Connects with what the station file says of its broker, under a client id of its own.
   *
   * @throws ForebayError where the broker cannot be reached.
   */
  static async connect(station: Station, warn: (message: string) => void): Promise<AskClient> {
    const { broker, site } = station;
    const clientId = `forebay-ask-${randomBytes(4).toString('hex')}`;
    const usual = { clientId, connectTimeout: CONNECT_MS, reconnectPeriod: 0, clean: true };
    const access = broker.kind === 'embedded' ? null : accessRemote(broker, warn);
    const address =
      access?.address ?? parseBrokerUrl(`mqtt://127.0.0.1:${(broker as { port: number }).port}`);
    const options: IClientOptions = {
      ...usual,
      protocolVersion: broker.kind === 'remote' && broker.protocol === 5 ? 5 : 4,
      ...(access?.username == null ? {} : { username: access.username }),
      ...(access?.password == null ? {} : { password: access.password }),
      ...(access?.tls.ca == null ? {} : { ca: access.tls.ca }),
      ...(access?.tls.cert == null ? {} : { cert: access.tls.cert }),
      ...(access?.tls.key == null ? {} : { key: access.tls.key }),
      rejectUnauthorized: true,
    };
    try {
      return new AskClient(await mqtt.connectAsync(address.href, options), site.id);
    } catch (error) {
      const place = `${address.host}:${address.port}`;
      const said = error instanceof Error ? error.message : String(error);
      throw new ForebayError('uplink.unreachable', `no connection to the broker at ${place}: ${said}`, {
        cause: error,
      });
    }
  }

  /**
   * One ask, one answer.
   *
   * @throws AskRefused with the agent's reason; ForebayError where no answer comes.
   */
  async ask(verb: AskVerb, body: Readonly<Record<string, unknown>>): Promise<Record<string, unknown>> {
    const early = this.#asked++ < AT_ONCE ? 0 : this.#askedMs + PACE_MS - performance.now();
    if (early > 0) await new Promise((resolve) => setTimeout(resolve, early));
    this.#askedMs = performance.now();
    const id = `cli-${randomBytes(6).toString('hex')}`;
    const topic = this.#topics.answer(id);
    await this.#client.subscribeAsync(topic, { qos: 1 });
    let timer: NodeJS.Timeout | undefined;
    let hear: ((name: string, payload: Buffer) => void) | undefined;
    try {
      const answered = new Promise<Record<string, unknown>>((resolve, reject) => {
        hear = (name, payload) => {
          if (name === topic) resolve(JSON.parse(payload.toString('utf8')) as Record<string, unknown>);
        };
        this.#client.on('message', hear);
        timer = setTimeout(() => {
          reject(
            new ForebayError('uplink.no-answer', `no answer to ask/${verb} within ${ANSWER_MS / 1000} s`),
          );
        }, ANSWER_MS);
      });
      await this.#client.publishAsync(this.#topics.ask(verb), JSON.stringify({ id, ...body }), { qos: 1 });
      const answer = await answered;
      if (answer.ok !== true) throw new AskRefused(String(answer.error));
      return answer;
    } finally {
      clearTimeout(timer);
      if (hear) this.#client.off('message', hear);
      await this.#client.unsubscribeAsync(topic).catch(() => undefined);
    }
  }

  async close(): Promise<void> {
    await this.#client.endAsync(true);
  }
}
