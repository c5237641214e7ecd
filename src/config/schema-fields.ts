/** The kinds of values of a station file; each says in its description what would be right. */

import { z } from 'zod';

export const idPattern = /^[a-z0-9-]{1,32}$/;

export const id = (description: string) =>
  z
    .string()
    .regex(idPattern)
    .meta({ description: `${description}, 1 to 32 of a-z, 0-9 and -` });
export const num = (min: number, max: number, description: string) =>
  z
    .number()
    .min(min)
    .max(max)
    .meta({ description: `${description}, ${min} to ${max}` });
export const int = (min: number, max: number, description: string) =>
  z
    .int()
    .min(min)
    .max(max)
    .meta({ description: `${description}, whole, ${min} to ${max}` });
export const text = (max: number, description: string) => z.string().min(1).max(max).meta({ description });
export const path = (description: string) => text(4000, description);
export const ascending = (min: number, max: number, description: string) =>
  z
    .tuple([z.number().min(min).max(max), z.number().min(min).max(max)])
    .refine(([low, high]) => low < high, { error: 'the first must be below the second' })
    .meta({ description: `${description}: [lower, upper], within ${min} to ${max}` });
export const mqttTopic = (description: string) =>
  z
    .string()
    .regex(/^[^+#\0]{1,500}$/)
    .meta({ description: `${description}, without + and #` });
