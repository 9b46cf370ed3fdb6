// Writes pictures of every stage, desktop and phone, light and dark, into a folder: node shoot.mjs FOLDER [PART OF NAME …]
// They are to be looked at, not compared byte by byte.

import { mkdirSync } from 'node:fs';
import path from 'node:path';
import { launch, openPage, settled } from './support/browser.mjs';
import { tunnelRun } from './support/reading.mjs';
import { serve } from './support/serve.mjs';

const [folder, ...wanted] = process.argv.slice(2);
if (!folder) throw new Error('name a folder for the pictures: node shoot.mjs FOLDER');
mkdirSync(folder, { recursive: true });

const sizes = { desktop: { width: 1440, height: 900 }, phone: { width: 390, height: 844 } };
const site = await serve();
const browser = await launch();
try {
  const { run, views } = await tunnelRun(site);
  const flawed = views.find(({ checks }) => checks.length > 0) ?? views[0];
  const fine = views.find(({ azimuth_deg: azimuth, checks }) => azimuth > 120 && checks.length === 0) ?? views[0];
  const stages = {
    archive: '/',
    run: `/?run=${run.id}`,
    view: `/?run=${run.id}&view=${fine.id}&frame=605`,
    flawed: `/?run=${run.id}&view=${flawed.id}&remove=piston,tilt&length_unit=waves`,
    refused: `/?run=${run.id}&view=${fine.id}&aperture=900%25`,
    index: '/?show=index',
  };
  for (const [size, viewport] of Object.entries(sizes)) {
    for (const colorScheme of ['light', 'dark']) {
      for (const [stage, address] of Object.entries(stages)) {
        const name = `${stage}-${size}-${colorScheme}`;
        if (wanted.length > 0 && !wanted.some((some) => name.includes(some))) continue;
        const { page, context } = await openPage(browser, { viewport, colorScheme });
        await page.goto(site.url + address);
        await settled(page);
        await page.screenshot({ path: path.join(folder, `${name}.png`), fullPage: true });
        await context.close();
      }
    }
  }
} finally {
  await browser.close();
  await site.close();
}
