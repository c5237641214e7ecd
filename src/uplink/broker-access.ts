import type { Broker } from '../config/station.ts';
import type { ConnectionSettings } from './connection.ts';
import { parseBrokerUrl } from './dial.ts';
import type { EmbeddedBroker } from './embedded-broker.ts';
import { readPem, readSecret } from './secrets.ts';

export type Access = Pick<
  ConnectionSettings,
  'address' | 'tls' | 'clientId' | 'username' | 'password' | 'keepaliveS'
>;

const embeddedKeepaliveS = 60;

export function accessEmbedded(broker: EmbeddedBroker): Access {
  return {
    address: parseBrokerUrl(`mqtt://127.0.0.1:${broker.port}`),
    tls: { ca: null, cert: null, key: null },
    clientId: 'forebay-agent',
    ...broker.credentials,
    keepaliveS: embeddedKeepaliveS,
  };
}

/** Reads the files anew, for each connection: a renewed certificate or password needs no restart. */
export function accessRemote(
  broker: Extract<Broker, { kind: 'remote' }>,
  warn: (message: string) => void,
): Access {
  const take = <T>({ value, warning }: { value: T; warning: string | null }): T => {
    if (warning !== null) warn(warning);
    return value;
  };
  return {
    address: parseBrokerUrl(broker.url),
    tls: {
      ca: broker.caFile === null ? null : take(readPem(broker.caFile, false)),
      cert: broker.certFile === null ? null : take(readPem(broker.certFile, false)),
      key: broker.keyFile === null ? null : take(readPem(broker.keyFile, true)),
    },
    clientId: broker.clientId,
    username: broker.username,
    password: broker.passwordFile === null ? null : take(readSecret(broker.passwordFile)),
    keepaliveS: broker.keepaliveS,
  };
}
