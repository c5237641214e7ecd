/** Every check against the outside: `npm run verify` prints them, the tests hold them. */
import { codingChecks } from './coding-checks.ts';
import { machineChecks } from './machine-checks.ts';
import { type OutsideCheck, signalChecks } from './outside-checks.ts';
import { recordChecks } from './record-checks.ts';

export const allChecks: readonly OutsideCheck[] = [
  ...signalChecks,
  ...machineChecks,
  ...recordChecks,
  ...codingChecks,
];
