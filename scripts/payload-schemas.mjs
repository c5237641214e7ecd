// Writes the JSON Schemas of all payloads to config/payloads.schema.json. Build first.
import { writeFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { payloadJsonSchema } from '../dist/uplink/payload-schemas.js';

const path = fileURLToPath(new URL('../config/payloads.schema.json', import.meta.url));
writeFileSync(path, `${JSON.stringify(payloadJsonSchema(), null, 2)}\n`);
