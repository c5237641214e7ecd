/**
 * The browser's side as one script. Its files are modules, so that they can be checked and tested one by one; a page from
 * disk cannot load modules, so they are joined here: imports of each other go, and what they export stays in one function.
 */

import { readFileSync } from 'node:fs';

/** Each after what it imports. */
const FILES = ['decode', 'figures', 'pyramid', 'chart', 'marks', 'waveform', 'spectrum', 'cascade', 'main'];

/** @throws Error where a file holds an import or an export of a form that joining would break. */
export function clientScript(): string {
  const parts = FILES.map((name) => {
    const text = readFileSync(new URL(`./client/${name}.js`, import.meta.url), 'utf8')
      .replace(/^import \{[^}]*\} from '\.\/[a-z-]+\.js';$/gm, '')
      .replace(/^export (?=(async )?(function|const|class) )/gm, '')
      .replace(/^\/\/# sourceMappingURL=.*$/gm, '')
      .trim();
    const left = /^(import|export)\b.*$/m.exec(text);
    if (left) throw new Error(`report/client/${name}.js cannot be joined: ${left[0]}`);
    return text;
  });
  return `(() => {\n'use strict';\n${parts.join('\n')}\n})();`;
}
