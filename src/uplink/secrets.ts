import { readFileSync, statSync } from 'node:fs';
import { ForebayError } from '../config/errors.ts';

export interface Secret {
  value: string;
  /** For the log: who else can read it. */
  warning: string | null;
}

/** A secret alone in a file; white space around it (an editor's last line end) is no part of it. */
export function readSecret(path: string): Secret {
  let value: string;
  let mode: number;
  try {
    value = readFileSync(path, 'utf8').trim();
    mode = statSync(path).mode;
  } catch (error) {
    throw new ForebayError('uplink.secret', `${path}: ${(error as Error).message}`, { cause: error });
  }
  if (value === '') throw new ForebayError('uplink.secret', `${path} is empty`);
  return { value, warning: (mode & 0o077) === 0 ? null : `${path} can be read by others: chmod 600 ${path}` };
}

/** A certificate or a key. */
export function readPem(path: string, key: boolean): { value: Buffer; warning: string | null } {
  const { value, warning } = readSecret(path);
  if (!value.includes('-----BEGIN ')) throw new ForebayError('uplink.secret', `${path} holds no PEM block`);
  return { value: Buffer.from(`${value}\n`), warning: key ? warning : null };
}
