// The accessibility check of axe-core over the page as it stands.

import { readFileSync } from 'node:fs';
import { createRequire } from 'node:module';
import assert from 'node:assert/strict';

const source = readFileSync(createRequire(import.meta.url).resolve('axe-core/axe.min.js'), 'utf8');

/** @param {import('playwright-core').Page} page @param {string} within  selector of the part to check */
export async function accessible(page, within = 'html') {
  // Through the debugger's protocol, which the page's policy does not concern.
  if (!(await page.evaluate(() => 'axe' in window))) await page.evaluate(source);
  const { violations } = await page.evaluate(
    (selector) => window.axe.run(selector, { resultTypes: ['violations'] }),
    within,
  );
  const told = violations.map(
    ({ id, help, nodes }) =>
      `${id}: ${help}\n${nodes.map(({ html, failureSummary }) => `    ${html.slice(0, 160)}\n    ${failureSummary.replaceAll('\n', ' ')}`).join('\n')}`,
  );
  assert.deepEqual(told, []);
}
