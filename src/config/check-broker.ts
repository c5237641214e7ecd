/** Where results go: exclusive keys, the URL, TLS files, and no secret in the file. */

import type { Report } from './issues.ts';
import type { LooseStationFile } from './schema.ts';

const remoteKeys = [
  'client_id',
  'protocol',
  'username',
  'password_file',
  'ca_file',
  'cert_file',
  'key_file',
] as const;
const tlsKeys = ['ca_file', 'cert_file', 'key_file'] as const;

export function checkBroker(file: LooseStationFile, report: Report): void {
  const broker = file.broker;
  if (!broker) return;
  if (broker.url === undefined) {
    for (const key of remoteKeys) {
      if (broker[key] === undefined) continue;
      const message =
        broker.embedded === undefined
          ? 'needs a broker to connect to, add broker.url'
          : 'does not go with embedded, take one of the two out';
      report('config.exclusive-keys', ['broker', key], message);
    }
    return;
  }
  if (broker.embedded !== undefined) {
    report('config.exclusive-keys', ['broker', 'embedded'], 'excludes url, keep one of the two');
  }
  const scheme = checkUrl(broker.url, report);
  if (scheme !== null && !['mqtts:', 'wss:'].includes(scheme)) {
    for (const key of tlsKeys.filter((name) => broker[name] !== undefined)) {
      report('config.exclusive-keys', ['broker', key], 'needs TLS, use mqtts:// or wss:// in broker.url');
    }
  }
  if ((broker.cert_file === undefined) !== (broker.key_file === undefined)) {
    const [there, absent] =
      broker.cert_file === undefined ? ['key_file', 'cert_file'] : ['cert_file', 'key_file'];
    report('config.missing-key', ['broker', absent!], `is missing, ${there} needs it beside it`);
  }
  if (broker.password_file !== undefined && broker.username === undefined) {
    report('config.missing-key', ['broker', 'username'], 'is missing, password_file needs it beside it');
  }
}

/** The scheme; null: there is none to rely on. */
function checkUrl(text: string, report: Report): string | null {
  const at = ['broker', 'url'];
  let url: URL;
  try {
    url = new URL(text);
  } catch {
    report('config.wrong-value', at, 'is not a URL, expected: mqtts://broker.example:8883');
    return null;
  }
  if (!['mqtt:', 'mqtts:', 'ws:', 'wss:'].includes(url.protocol)) {
    report(
      'config.wrong-value',
      at,
      `starts with ${url.protocol}//, expected: mqtt://, mqtts://, ws:// or wss://`,
    );
    return null;
  }
  if (url.hostname === '')
    report('config.wrong-value', at, 'names no host, expected: mqtts://broker.example:8883');
  if (url.username !== '' || url.password !== '') {
    const message = 'holds user or password, use broker.username and broker.password_file';
    report('config.secret', at, message);
  }
  return url.protocol;
}
