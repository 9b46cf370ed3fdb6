// Makes the picture of the README, client-web/picture.png, from the demo archive: node picture.mjs

import { statSync } from 'node:fs';
import path from 'node:path';
import { launch, openPage, settled } from './support/browser.mjs';
import { pageFolder } from './support/places.mjs';
import { tunnelRun } from './support/reading.mjs';
import { serve } from './support/serve.mjs';

const mostBytes = 250e3; // it lies in the repository
const picture = path.join(pageFolder, 'picture.png');

const site = await serve({ views: 54, frames: 2000, grid: 64 });
const browser = await launch();
try {
  const { run, views } = await tunnelRun(site);
  const view =
    views.find(
      ({ azimuth_deg: azimuth, elevation_deg: elevation, checks }) =>
        azimuth > 115 && elevation > 30 && checks.length === 0,
    ) ?? views[0];
  const { page } = await openPage(browser, { viewport: { width: 1440, height: 1330 }, colorScheme: 'light' });
  await page.goto(`${site.url}/?run=${run.id}&view=${view.id}&frame=700`);
  await settled(page);
  await page.screenshot({ path: picture });
  const { size } = statSync(picture);
  if (size > mostBytes) throw new Error(`${picture} has ${size} bytes, more than ${mostBytes}`);
  console.log(`${picture}: ${size} bytes, ${view.id}`);
} finally {
  await browser.close();
  await site.close();
}
