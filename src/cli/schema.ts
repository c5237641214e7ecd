/** `forebay schema`: the JSON Schema of the station file, for editors. Redirect it to config/station.schema.json. */

import { z } from 'zod';
import { stationSchema } from '../config/schema.ts';

export function schemaText(): string {
  return `${JSON.stringify(z.toJSONSchema(stationSchema, { io: 'input' }), null, 2)}\n`;
}
