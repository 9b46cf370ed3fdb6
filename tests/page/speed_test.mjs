// A long record: 100 000 frames must be on the screen well under a second after they were asked for, and at every zoom.

import { test, before, after } from 'node:test';
import assert from 'node:assert/strict';
import { launch, openPage, settled } from './support/browser.mjs';
import { tunnelRun } from './support/reading.mjs';
import { serve } from './support/serve.mjs';

let site, browser, run, view;

before(async () => {
  site = await serve({ views: 1, frames: 100000, grid: 16 });
  browser = await launch();
  const found = await tunnelRun(site);
  run = found.run;
  view = found.views[0];
});
after(async () => {
  await browser?.close();
  await site?.close();
});

test('100 000 frames are drawn in well under a second', async (context) => {
  const { page, context: window, complaints } = await openPage(browser, { viewport: { width: 1440, height: 900 } });
  await page.goto(`${site.url}/?run=${run.id}&view=${view.id}&zoom=0.5..0.6`);
  await settled(page);

  const milliseconds = await page.evaluate(async () => {
    const click = async (name) => {
      const start = performance.now();
      [...document.querySelectorAll('[data-name=series] button')].find((button) => button.textContent === name).click();
      while (document.body.dataset.busy) await new Promise((resolve) => requestAnimationFrame(resolve));
      await new Promise((resolve) => requestAnimationFrame(resolve));
      return performance.now() - start;
    };
    return await click('Whole record');
  });

  context.diagnostic(`whole record of ${view.frames} frames: ${milliseconds.toFixed(0)} ms`);
  assert.equal(view.frames, 100000);
  assert.match(await page.locator('[data-name=series] .finding').innerText(), /^100\u2009000 frames/);
  assert.ok(milliseconds < 700, `${milliseconds} ms`);
  assert.deepEqual(complaints, []);
  await window.close();
});

test('what is sent for a plot is as long as the plot is wide, not as the record', async () => {
  const { page, context: window } = await openPage(browser, { viewport: { width: 1440, height: 900 } });
  const sizes = [];
  page.on('response', async (response) => {
    if (response.url().includes('/series?')) sizes.push((await response.body()).length);
  });
  await page.goto(`${site.url}/?run=${run.id}&view=${view.id}`);
  await settled(page);

  assert.ok(sizes.length >= 1 && sizes.every((size) => size < 200e3), String(sizes));
  await window.close();
});
