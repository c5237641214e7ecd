// Holds the figures of the product against values from outside of it, one line a check, from the sources as they are.
//
//   node scripts/verify.mjs [part of an id]
//
// Ends with `N passed, N failed` and status 1 where any failed or none was found. The lists: test/reference/all-checks.ts.
import { fileURLToPath } from 'node:url';
import { createServer } from 'vite';

const root = fileURLToPath(new URL('..', import.meta.url));
const part = process.argv[2] ?? '';
const server = await createServer({
  root,
  configFile: false,
  appType: 'custom',
  logLevel: 'error',
  optimizeDeps: { noDiscovery: true, include: [] },
  server: { middlewareMode: true, hmr: false, ws: false, watch: null },
});
let passed = 0;
let failed = 0;
try {
  const { allChecks } = await server.ssrLoadModule('/test/reference/all-checks.ts');
  const { runCheck } = await server.ssrLoadModule('/test/reference/outside-checks.ts');
  for (const check of allChecks.filter(({ id }) => id.includes(part))) {
    const result = runCheck(check);
    console.log(result.line);
    if (result.passed) passed++;
    else failed++;
  }
} finally {
  await server.close();
}
console.log(`${passed} passed, ${failed} failed`);
process.exitCode = failed > 0 || passed === 0 ? 1 : 0;
