/** Ids: each once, and none that is a topic of the agent. */

import type { Report } from './issues.ts';
import type { KeyPath } from './yaml-text.ts';

/** Reports ids that stand twice or are reserved; `reserved` says what each reserved one is. */
export function checkIds(
  items: readonly ({ id?: string | undefined } | undefined)[] | undefined,
  path: KeyPath,
  what: string,
  reserved: Readonly<Record<string, string>>,
  report: Report,
): void {
  const seen = new Set<string>();
  for (const [index, item] of (items ?? []).entries()) {
    if (item?.id === undefined) continue;
    const at = [...path, index, 'id'];
    if (Object.hasOwn(reserved, item.id)) {
      report(
        'config.reserved-id',
        at,
        `${item.id} is ${reserved[item.id]}, choose another id for this ${what}`,
      );
    } else if (seen.has(item.id)) {
      report('config.duplicate-id', at, `there is a ${what} ${item.id} already, each needs its own id`);
    }
    seen.add(item.id);
  }
}

/** Reports keys that exclude each other; `needed`: one of them must be there. Returns the first that is there. */
export function checkOneOf<Key extends string>(
  map: { [K in Key]?: unknown },
  keys: readonly Key[],
  path: KeyPath,
  needed: boolean,
  report: Report,
): Key | null {
  const present = keys.filter((key) => map[key] !== undefined);
  for (const key of present.slice(1)) {
    report('config.exclusive-keys', [...path, key], `excludes ${present[0]}, keep one of the two`);
  }
  if (present.length === 0 && needed) {
    report(
      'config.exclusive-keys',
      path,
      `has none of ${keys.join(', ')}, exactly one is needed`,
      keys.map((key) => [...path, key]),
    );
  }
  return present[0] ?? null;
}
