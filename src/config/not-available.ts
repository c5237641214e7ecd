/** What a station file may ask for already and the agent cannot do yet: refused at start, never ignored. */

import type { Station } from './station.ts';

const asksMissing: readonly string[] = ['snapshot', 'snapshots', 'fetch'];

/** Empty where the agent can do all that the station asks for; `place` is the path of the key in the file. */
export function notAvailableYet(station: Station): { readonly place: string; readonly what: string }[] {
  return station.asks.flatMap((verb, index) =>
    station.asksListed && asksMissing.includes(verb)
      ? [{ place: `asks.${index}`, what: `ask ${verb} is not available yet` }]
      : [],
  );
}
