/** Links: one transport each, one owner of each device, formats with their own keys, channels that exist. */

import { checkIds, checkOneOf } from './check-ids.ts';
import { type Report, suggestion } from './issues.ts';
import type { LooseStationFile } from './schema.ts';

export type LooseLink = NonNullable<NonNullable<LooseStationFile['links']>[number]>;

export function checkLinks(file: LooseStationFile, report: Report): void {
  const links = file.links ?? [];
  checkIds(links, ['links'], 'link', { gateway: 'the gateway itself in agent/alarm topics' }, report);
  const owners = new Map<string, string>();
  for (const [index, link] of links.entries()) {
    if (!link) continue;
    const path = ['links', index];
    const transport = checkOneOf(link, ['serial', 'tcp'], path, true, report);
    const address = transport === 'serial' ? link.serial?.path : addressOf(link);
    if (address !== undefined) {
      const owner = owners.get(address);
      const end = transport === 'serial' ? [...path, 'serial', 'path'] : [...path, 'tcp'];
      if (owner !== undefined) {
        report(
          'config.duplicate-id',
          end,
          `${address} belongs to link ${owner} already, one link reads a device`,
        );
      }
      owners.set(address, link.id ?? `${index}`);
    }
    if ((link.format ?? 'frames') === 'frames') checkFrames(link, path, report);
    else checkColumns(link, path, report);
    const known = channelNames(link);
    for (const name of Object.keys(link.sensors ?? {})) {
      if (known === null || known.includes(name)) continue;
      const message = `this link has no channel ${name}${suggestion(name, known)}`;
      report('config.reference', [...path, 'sensors', name], message);
    }
  }
}

function addressOf(link: LooseLink): string | undefined {
  const { host, port } = link.tcp ?? {};
  return host === undefined || port === undefined ? undefined : `${host}:${port}`;
}

function checkFrames(link: LooseLink, path: (string | number)[], report: Report): void {
  for (const key of ['sample_rate_hz', 'channels'] as const) {
    if (link[key] === undefined) continue;
    const message = `belongs to format columns, frames describe themselves; use expect.${key} to hold a node to it`;
    report('config.exclusive-keys', [...path, key], message);
  }
  checkOnce(link.expect?.channels ?? [], [...path, 'expect', 'channels'], report);
}

function checkColumns(link: LooseLink, path: (string | number)[], report: Report): void {
  if (link.expect !== undefined) {
    const message = 'belongs to format frames, lines of numbers carry no node to compare with';
    report('config.exclusive-keys', [...path, 'expect'], message);
  }
  for (const key of ['sample_rate_hz', 'channels'] as const) {
    if (link[key] !== undefined) continue;
    report('config.missing-key', [...path, key], 'is missing, format columns needs it');
  }
  const channels = link.channels ?? [];
  checkOnce(
    channels.map((channel) => channel?.name),
    [...path, 'channels'],
    report,
    'name',
  );
  checkOnce(
    channels.map((channel) => channel?.column),
    [...path, 'channels'],
    report,
    'column',
  );
  for (const [index, channel] of channels.entries()) {
    const at = [...path, 'channels', index];
    if (channel?.scale === 0) {
      report(
        'config.impossible',
        [...at, 'scale'],
        'is 0, so every figure would be 0; give units per printed number',
      );
    }
    const largest = Math.max(...(channel?.range ?? []).map((edge) => Math.abs(edge ?? 0)));
    if (largest * 10 ** (channel?.decimals ?? 0) > 2 ** 31 - 1) {
      const message = 'with these decimals does not fit a count of 32 bit, use fewer decimals';
      report('config.impossible', [...at, 'range'], message);
    }
  }
}

function checkOnce(
  values: readonly (string | number | undefined)[],
  path: (string | number)[],
  report: Report,
  key?: string,
): void {
  for (const [index, value] of values.entries()) {
    if (value === undefined || values.indexOf(value) === index) continue;
    const at = key === undefined ? [...path, index] : [...path, index, key];
    report('config.duplicate-id', at, `${value} stands twice, each channel needs its own`);
  }
}

/** The channels of a link as far as the file tells; null: the node will say. */
export function channelNames(link: LooseLink): string[] | null {
  const names =
    link.format === 'columns' ? link.channels?.map((channel) => channel?.name) : link.expect?.channels;
  return names?.every((name) => name !== undefined) ? (names as string[]) : null;
}
