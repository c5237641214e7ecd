/** What a station file may ask for already and the agent cannot do yet: refused at start, never ignored. */

import type { Station } from './station.ts';

const asksAvailable: readonly string[] = ['readings', 'acknowledge'];

/** Empty where the agent can do all that the station asks for; `place` is the path of the key in the file. */
export function notAvailableYet(station: Station): { readonly place: string; readonly what: string }[] {
  const rules = station.rules.flatMap((rule, index) =>
    rule.test.kind === 'baseline' || rule.test.kind === 'rise'
      ? [
          {
            place: `alarms.${index}.${rule.test.kind}`,
            what: `rule ${rule.id}: ${rule.test.kind} is not available yet`,
          },
        ]
      : [],
  );
  const asks = station.asks.flatMap((verb, index) =>
    station.asksListed && !asksAvailable.includes(verb)
      ? [{ place: `asks.${index}`, what: `ask ${verb} is not available yet` }]
      : [],
  );
  return [...rules, ...asks];
}
