// Every panel with the demo's results, light and dark, wide and narrow: an accessibility check each, no sideways
// scrolling, and a walk through the page by keyboard alone.

import { test, before, after } from 'node:test';
import assert from 'node:assert/strict';
import { accessible } from './support/accessible.mjs';
import { launch, openPage, settled } from './support/browser.mjs';
import { tunnelRun } from './support/reading.mjs';
import { serve } from './support/serve.mjs';

let site, browser, places;

before(async () => {
  site = await serve({ views: 24, frames: 600, grid: 32 });
  browser = await launch();
  const { run, views } = await tunnelRun(site);
  const flawed = views.find(({ checks }) => checks.length > 0) ?? views[0];
  places = {
    archive: '/',
    run: `/?run=${run.id}`,
    view: `/?run=${run.id}&view=${flawed.id}&frame=20`,
    index: '/?show=index',
  };
});
after(async () => {
  await browser?.close();
  await site?.close();
});

const looks = [
  { name: 'light, wide', options: { viewport: { width: 1440, height: 900 }, colorScheme: 'light' } },
  { name: 'dark, wide', options: { viewport: { width: 1440, height: 900 }, colorScheme: 'dark' } },
  { name: 'light, narrow', options: { viewport: { width: 390, height: 844 }, colorScheme: 'light' } },
  { name: 'dark, narrow', options: { viewport: { width: 390, height: 844 }, colorScheme: 'dark' } },
];

for (const { name, options } of looks) {
  for (const place of ['archive', 'run', 'view', 'index']) {
    test(`${place} is accessible, ${name}`, async () => {
      const { context, page, complaints } = await openPage(browser, options);
      await page.goto(site.url + places[place]);
      await settled(page);
      // One table of numbers is like another; all of them would only make the check slow.
      for (const button of await page.getByRole('button', { name: 'Numbers' }).all()) {
        if (await button.evaluate((each) => each.closest('[data-name=field-of-regard], [data-name=histogram]')))
          await button.click();
      }
      for (const details of await page.locator('.more > summary, .preparation:not([open]) > summary').all())
        await details.click();

      await accessible(page);

      assert.equal(
        await page.evaluate(() => document.documentElement.scrollWidth - innerWidth),
        0,
        'nothing sticks out sideways',
      );
      assert.deepEqual(complaints, []);
      await context.close();
    });
  }
}

test('at 320 pixels, which is a desktop page at 400 percent, nothing sticks out sideways', async () => {
  const { context, page } = await openPage(browser, { viewport: { width: 320, height: 700 } });
  for (const place of Object.values(places)) {
    await page.goto(site.url + place);
    await settled(page);
    assert.equal(await page.evaluate(() => document.documentElement.scrollWidth - innerWidth), 0, place);
  }
  await context.close();
});

test('with forced colours the page still draws, and is accessible', async () => {
  const { context, page, complaints } = await openPage(browser, {
    viewport: { width: 1440, height: 900 },
    forcedColors: 'active',
  });
  await page.goto(site.url + places.view);
  await settled(page);

  await accessible(page);
  assert.deepEqual(complaints, []);
  await context.close();
});

test('the dialogs are accessible and closed by Escape', async () => {
  const { context, page, complaints } = await openPage(browser, { viewport: { width: 1440, height: 900 } });
  await page.goto(site.url + places.view);
  await settled(page);

  await page.locator('[data-name=series]').getByRole('button', { name: 'Call' }).click();
  await accessible(page, '#call-dialog');
  await page.keyboard.press('Escape');
  assert.equal(await page.locator('#call-dialog').isVisible(), false);
  await page.getByRole('button', { name: 'Keys' }).click();
  await accessible(page, '#keys-dialog');
  await page.keyboard.press('Escape');
  assert.deepEqual(complaints, []);
  await context.close();
});

test('Tab visits every plot once, always with something to see, and nothing twice', async () => {
  const { context, page } = await openPage(browser, { viewport: { width: 1440, height: 900 } });
  await page.goto(site.url + places.view);
  await settled(page);
  await page.evaluate(() => document.activeElement.blur());
  const visited = [];

  for (let k = 0; k < 150; ++k) {
    await page.keyboard.press('Tab');
    const here = await page.evaluate(() => {
      const focused = document.activeElement;
      if (!focused || focused === document.body) return null;
      const ring = [focused, ...focused.querySelectorAll('.cell'), focused.parentElement].some((each) => {
        const style = getComputedStyle(each);
        return style.boxShadow !== 'none' || parseFloat(style.strokeWidth) >= 4 || style.outlineStyle !== 'none';
      });
      const figure = focused.closest('[data-name]')?.dataset.name ?? null;
      const isPlot = focused.matches('.line-plot, .heat-map, .histogram, .view-link');
      return { figure, isPlot, ring, what: focused.outerHTML.slice(0, 80) };
    });
    if (!here) break;
    assert.ok(here.ring, `no focus to see on ${here.what}`);
    if (here.isPlot) visited.push(here.figure);
  }

  assert.deepEqual(visited.sort(), [
    'convergence',
    'field-of-regard',
    'frames',
    'histogram',
    'mean-map',
    'rms-map',
    'series',
  ]);
  await context.close();
});

test('a question mark lists the keys, but not while text is typed', async () => {
  const { context, page } = await openPage(browser, { viewport: { width: 1440, height: 900 } });
  await page.goto(site.url + places.view);
  await settled(page);

  await page.getByLabel('Diameter').press('?');
  assert.equal(await page.locator('#keys-dialog').isVisible(), false);
  await page.getByRole('slider', { name: /^Against time/ }).press('?');
  assert.equal(await page.locator('#keys-dialog').isVisible(), true);
  await context.close();
});

test('one h1, landmarks, and a language on every stage', async () => {
  const { context, page } = await openPage(browser, { viewport: { width: 1440, height: 900 } });
  for (const place of Object.values(places)) {
    await page.goto(site.url + place);
    await settled(page);
    assert.equal(await page.locator('h1').count(), 1, place);
    assert.equal(await page.locator('main').count(), 1, place);
    assert.equal(await page.locator('html').getAttribute('lang'), 'en');
  }
  await context.close();
});
