/** `forebay check`: validates a station file and prints what follows from it. */

import { accessSync, constants } from 'node:fs';
import { ForebayError } from '../config/errors.ts';
import { loadStation } from '../config/load.ts';
import type { Station } from '../config/station.ts';
import { type CheckWarning, reportLinks, reportUplink } from './check-load.ts';
import { reportPoints } from './check-report.ts';
import { linkText, pointText, uplinkText } from './check-text.ts';

export interface CheckOptions {
  readonly config: string;
  readonly json: boolean;
  readonly out: { write(text: string): unknown };
  readonly err: { write(text: string): unknown };
}

/** @returns the exit status: 0, or 2 where the file is wrong. Warnings do not change it. */
export async function checkCommand(options: CheckOptions): Promise<number> {
  const { config, json, out, err } = options;
  try {
    const station = loadStation(config);
    const { points, plans, warnings } = reportPoints(station);
    const { links, warnings: linkWarnings } = reportLinks(station, plans);
    const { uplink, warnings: uplinkWarnings } = reportUplink(station);
    const all = [...warnings, ...linkWarnings, ...uplinkWarnings, ...fileWarnings(station)];
    const rings = links.map((link) => link.ring_bytes);
    const memory = {
      kind: 'memory',
      ring_bytes: rings.every((bytes) => bytes !== null)
        ? rings.reduce((sum, bytes) => sum + bytes, 0)
        : null,
    };
    const summary = {
      kind: 'station',
      site: station.site.id,
      config: station.configHash,
      machines: station.machines.length,
      points: points.length,
      links: links.length,
      warnings: all.length,
    };
    if (json) {
      for (const object of [summary, ...links, ...points, memory, uplink, ...all]) {
        out.write(`${JSON.stringify(object)}\n`);
      }
      return 0;
    }
    const ring =
      memory.ring_bytes === null
        ? 'known when the nodes speak'
        : `${(memory.ring_bytes / 1e6).toFixed(1)} MB`;
    const text = [
      `${station.site.name} (${station.site.id}), configuration ${station.configHash}`,
      ...links.map(linkText),
      ...points.map(pointText),
      `memory for the sample rings: ${ring}`,
      uplinkText(uplink),
      ...all.map(({ where, text: words }) => `warning: ${where}: ${words}`),
      all.length === 0 ? 'no warnings' : `${all.length} warning${all.length === 1 ? '' : 's'}`,
    ];
    out.write(`${text.join('\n')}\n`);
    return 0;
  } catch (error) {
    if (!(error instanceof ForebayError)) throw error;
    err.write(`${error.message}\n${error.fix}\n`);
    return 2;
  }
}

function fileWarnings(station: Station): CheckWarning[] {
  const broker = station.broker;
  if (broker.kind === 'embedded') return [];
  const files = {
    password_file: broker.passwordFile,
    ca_file: broker.caFile,
    cert_file: broker.certFile,
    key_file: broker.keyFile,
  };
  return Object.entries(files).flatMap(([key, path]): CheckWarning[] => {
    if (path === null) return [];
    try {
      accessSync(path, constants.R_OK);
      return [];
    } catch {
      return [{ kind: 'warning', where: `broker.${key}`, text: `${path} cannot be read here` }];
    }
  });
}
