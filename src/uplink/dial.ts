/**
 * Opens the socket to the broker. The raw socket is kept apart from the TLS stream on it, for bytes are counted where
 * they cost money. The broker's certificate is always verified: no setting, here or in the environment, turns that off.
 */

import { isIP, connect as netConnect, type Socket } from 'node:net';
import type { Duplex } from 'node:stream';
import { createSecureContext, connect as tlsConnect } from 'node:tls';
import { ForebayError } from '../config/errors.ts';

export interface BrokerAddress {
  readonly secure: boolean;
  readonly websocket: boolean;
  readonly host: string;
  readonly port: number;
  readonly href: string;
}

export interface TlsFiles {
  readonly ca: Buffer | null;
  readonly cert: Buffer | null;
  readonly key: Buffer | null;
}

const defaultPorts: Record<string, number> = { 'mqtt:': 1883, 'mqtts:': 8883, 'ws:': 80, 'wss:': 443 };

export function parseBrokerUrl(text: string): BrokerAddress {
  const url = URL.canParse(text) ? new URL(text) : null;
  const port = url === null ? undefined : defaultPorts[url.protocol];
  if (url === null || port === undefined || url.hostname === '') {
    throw new ForebayError('uplink.url', 'the address of the broker is no mqtt, mqtts, ws or wss URL');
  }
  if (url.username !== '' || url.password !== '') {
    throw new ForebayError('uplink.url', 'the address of the broker holds a user or a password');
  }
  return {
    secure: url.protocol === 'mqtts:' || url.protocol === 'wss:',
    websocket: url.protocol === 'ws:' || url.protocol === 'wss:',
    host: url.hostname.replace(/^\[(.*)\]$/, '$1'),
    port: url.port === '' ? port : Number(url.port),
    href: url.href,
  };
}

export interface Line {
  readonly raw: Socket;
  /** What MQTT is spoken on: the raw socket, or TLS upon it. */
  readonly stream: Duplex;
}

/** @throws what OpenSSL says of files that it cannot use. */
export function dial(address: BrokerAddress, files: TlsFiles): Line {
  // First, for it throws where a file is no certificate or key: no socket may be left on its way then.
  const secureContext = address.secure
    ? createSecureContext({
        ...(files.ca === null ? {} : { ca: files.ca }),
        ...(files.cert === null ? {} : { cert: files.cert }),
        ...(files.key === null ? {} : { key: files.key }),
        minVersion: 'TLSv1.2',
      })
    : null;
  const raw = netConnect({ host: address.host, port: address.port });
  raw.setKeepAlive(true, 60_000);
  if (secureContext === null) return { raw, stream: raw };
  const stream = tlsConnect({
    socket: raw,
    host: address.host,
    ...(isIP(address.host) === 0 ? { servername: address.host } : {}),
    secureContext,
    rejectUnauthorized: true,
  });
  raw.on('error', (error) => stream.destroy(error));
  return { raw, stream };
}

/** What OpenSSL and Node call certificate troubles. */
const certificateCodes =
  /^(CERT_|DEPTH_ZERO|SELF_SIGNED|UNABLE_TO_|ERR_TLS_CERT|INVALID_CA|INVALID_PURPOSE|HOSTNAME_MISMATCH|ERR_SSL_.*(ALERT|CERT))/;

/** Turns what a socket or TLS says into an error that a person can act on; others stay as they are. */
export function explainDial(error: Error, address: BrokerAddress): Error {
  const code = String((error as NodeJS.ErrnoException).code ?? '');
  const place = `${address.host}:${address.port}`;
  const cause = { cause: error };
  // A gateway without a battery clock boots in the past.
  if (code === 'CERT_NOT_YET_VALID') {
    const message = `the certificate of ${place} is not valid yet: is this gateway's clock synchronised?`;
    return new ForebayError('uplink.clock', message, cause);
  }
  if (certificateCodes.test(code)) {
    return new ForebayError('uplink.certificate', `TLS with ${place}: ${error.message} (${code})`, cause);
  }
  return error;
}

/** Whether a connection ended as one does that the other side ends; if not, it was the link or this gateway. */
export function otherSideHungUp(error: Error | null): boolean {
  return error === null || ['ECONNRESET', 'EPIPE'].includes(String((error as NodeJS.ErrnoException).code));
}
