// Holds the figures of the product against values from outside of it, one line a check, from the sources as they are.
//
//   node scripts/verify.mjs [part of an id]
//
// Ends with `N passed, N failed` and status 1 where any failed or none was found. The lists: test/reference/all-checks.ts.
import { fileURLToPath } from 'node:url';
import { runnerImport } from 'vite';

const root = fileURLToPath(new URL('..', import.meta.url));
const part = process.argv[2] ?? '';
const { module } = await runnerImport(`${root}test/reference/all-checks.ts`);
const { module: checks } = await runnerImport(`${root}test/reference/outside-checks.ts`);
let passed = 0;
let failed = 0;
for (const check of module.allChecks.filter(({ id }) => id.includes(part))) {
  const result = checks.runCheck(check);
  console.log(result.line);
  if (result.passed) passed++;
  else failed++;
}
console.log(`${passed} passed, ${failed} failed`);
process.exitCode = failed > 0 || passed === 0 ? 1 : 0;
